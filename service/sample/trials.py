"""What is loaded, under which names, and jobs to submit on it."""

from dataclasses import dataclass
from typing import Any, Literal

from service.sample import fleets, windows

Document = dict[str, Any]


@dataclass(frozen=True)
class Loaded:
    """A stored document: its revisions, first to last, and what there is to say of it."""

    kind: Literal["fleet", "window"]
    id: str
    revisions: tuple[Document, ...]
    says: str


@dataclass(frozen=True)
class Trial:
    """A job on stored documents: what it tries, and what is to be expected."""

    tries: str
    expect: str
    job: Document


def documents() -> list[Loaded]:
    """Return the fleets and windows of the sample."""
    return [
        Loaded("fleet", "sample-quay", (fleets.quay(),), "two stores behind one connection"),
        Loaded("fleet", "sample-kiln", (fleets.kiln(),), "a store that fills slowly"),
        Loaded("fleet", "sample-twenty", (fleets.twenty(),), "twenty stores behind a narrow connection"),
        Loaded("window", "sample-day-ahead", (windows.day_ahead(),), "a day in hours"),
        Loaded("window", "sample-25-hours", (windows.long_day(),), "the day on which clocks go back, 25 hours"),
        Loaded(
            "window",
            "sample-late-prices",
            (windows.expected_prices(), windows.published_prices()),
            "revision 1 as forecast, revision 2 as published late",
        ),
        Loaded("window", "sample-near-zero", (windows.near_zero(),), "quarter-hours, prices on both sides of zero"),
    ]


def trials() -> list[Trial]:
    """Return a job for each thing to try."""
    return [
        Trial("a day that can be planned", "finished, optimal", _on_quay("sample-day-ahead", _promise(2, "17", "22"))),
        Trial(
            "a promise that cannot be kept",
            "finished, infeasible: its diagnosis says why, how far, and what cures it",
            {
                "label": "sample: too much promised",
                "fleet_id": "sample-kiln",
                "window_id": "sample-day-ahead",
                "initial": {"kiln-b1": {"stored_mwh": 0.4}},
                "commitments": [{**_promise(3, "17", "21"), "applies_to": {"assets": ["kiln-b1"]}}],
            },
        ),
        Trial(
            "two hours between 02:00 and 03:00, on the one day that has them",
            "finished, optimal, 25 intervals",
            _on_quay("sample-25-hours", _promise(2, "02", "03")),
        ),
        Trial(
            "prices that came late",
            "finished, optimal, on revision 2 of the window",
            _on_quay("sample-late-prices", _promise(2, "16", "21")),
        ),
        Trial(
            "a job that takes long: cancel it, or wait",
            "running until its time limit, then feasible",
            {
                "label": "sample: takes long",
                "fleet_id": "sample-twenty",
                "window_id": "sample-near-zero",
                "missing_initial": "assume_middle",
                "relative_gap": 1e-7,
                "time_limit_seconds": 30,
            },
        ),
    ]


def _on_quay(window: str, promise: Document) -> Document:
    return {
        "label": f"sample: {window.removeprefix('sample-')}",
        "fleet_id": "sample-quay",
        "window_id": window,
        "initial": {"quay-b1": {"stored_mwh": 2.0}, "quay-b2": {"state_of_charge_percent": 50}},
        "commitments": [promise],
    }


def _promise(hours: float, begin: str, end: str) -> Document:
    return {
        "id": "firm-hours",
        "kind": "hours_at_least",
        "applies_to": {"assets": ["quay-b1"]},
        "threshold": {"fraction_of_rated": 0.5},
        "hours": hours,
        "each_day": True,
        "between": [f"{begin}:00", f"{end}:00"],
    }
