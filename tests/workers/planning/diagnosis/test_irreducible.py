"""Random requests that cannot be met: what the diagnosis says of them holds before an oracle that shares nothing.

Also: the checks themselves notice every fault planted in a diagnosis that is right.
"""

from __future__ import annotations

import json
from collections import Counter
from collections.abc import Callable
from datetime import date
from pathlib import Path
from typing import Any

import pytest

from schemas.diagnosis import Diagnosis
from schemas.schedule import Schedule
from tests.oracles.elements import kind_of
from tests.oracles.formulation import solve
from tests.oracles.random_infeasible import infeasible_request
from tests.oracles.random_mixed import mixed_request
from tests.workers.planning.diagnosis.naming import conflicts_of
from tests.workers.planning.diagnosis.random_checks import faults_of
from tests.workers.planning.jobs import answer, hours, job, outage, store

Document = dict[str, Any]

INFEASIBLE = 230
QUICK = (0, 1, 25, 3, 4, 5, 29, 7, 8, 9, 56, 11, 12, 13, 60, 38, 16, 17, 18, 19, 20, 21, 22)
"""One seed for each kind of element that the requests aim at, of those that take a second at most."""

STORED = Path(__file__).parents[3] / "instances"


def _faults(document: Document, most_elements: int) -> tuple[list[str], Counter[str]]:
    """Return what is wrong with the answer to an infeasible request, and the kinds of element it blames."""
    found = answer(document)
    if not isinstance(found, Diagnosis):
        return [f"no diagnosis: {found.outcome}"], Counter()
    blamed = {kind_of(document, member) for members in conflicts_of(found) for member in members}
    return faults_of(document, found, most_elements=most_elements), Counter(blamed)


def _hold(seeds: list[int], most_elements: int) -> Counter[str]:
    """Check the diagnosis of every seed; a request whose diagnosis is wrong is stored, so that it stays a test."""
    blamed: Counter[str] = Counter()
    for seed in seeds:
        document = infeasible_request(seed)
        faults, kinds = _faults(document, most_elements)
        if faults:
            STORED.mkdir(exist_ok=True)
            (STORED / f"infeasible-{seed}.json").write_text(json.dumps(document, indent=1))
            pytest.fail(f"seed {seed}; stored as tests/instances/infeasible-{seed}.json\n" + "\n".join(faults))
        blamed += kinds
    print(
        f"seeds {seeds[0]}-{seeds[-1]} blame", *(f"{kind}: {count}" for kind, count in blamed.most_common()), sep="\n"
    )
    return blamed


def test_a_tenth_of_the_diagnoses_hold_before_the_oracle() -> None:
    assert len(QUICK) == INFEASIBLE // 10
    assert len(_hold(list(QUICK), most_elements=7)) > 8


def test_the_diagnosis_of_the_day_holds_before_the_oracle() -> None:
    seed = date.today().toordinal()  # noqa: DTZ011 - any number that changes daily will do
    print(f"seed of the day: {seed}")
    _hold([seed], most_elements=9)


@pytest.mark.full
def test_every_diagnosis_holds_before_the_oracle() -> None:
    assert len(_hold(list(range(INFEASIBLE)), most_elements=9)) > 20


def test_stored_requests_that_were_wrongly_diagnosed_are_diagnosed_rightly_now() -> None:
    for path in sorted(STORED.glob("infeasible-*.json")):
        faults, _ = _faults(json.loads(path.read_text()), most_elements=7)
        assert faults == [], path.name


def test_requests_that_can_be_met_get_no_diagnosis() -> None:
    met = [mixed_request(seed, assets=2, intervals=5) for seed in range(900, 912)]
    possible = [document for document in met if solve(document).outcome == "optimal"]
    assert len(possible) > 5
    for document in possible:
        assert isinstance(answer(document), Schedule)


# 1.2 MWh are stored and nothing charges; 0.2 must stay: 2 of the 3 hours at 0.5 MW are to be had, or 3 at 0.33 MW.
SHORT = job(
    [10.0, 20.0, 30.0, 40.0],
    store(charge_limit_mw=0.0),
    stored=1.2,
    final=0.2,
    commitments=[hours({"assets": ["quay-b1"]}, 3.0, 0.5)],
)
ROW = {"pointer": "/commitments/0", "asset": "quay-b1", "text": "3 h at 0.5 MW"}
STORED_ENERGY = {"pointer": "/initial/quay-b1/stored_mwh", "text": "1.2 MWh at the start"}
TARGET = {"pointer": "/targets/quay-b1/final_stored_mwh", "text": "0.2 MWh at the end"}


def _repair(member: str, was: float, becomes: float, unit: str, margin: float) -> Document:
    pointer = f"/commitments/0/{member}"
    change = {"lever": "commitments", "pointer": pointer, "from": was, "to": becomes, "unit": unit}
    patch = [{"op": "replace", "path": pointer, "value": becomes}]
    proof = {"verified": True, "margin": margin, "margin_bound": margin}
    return {"text": f"{member} {becomes}", "change": change, "changes": [change], "patch": patch} | proof


def _nearest(document: Document, powers: list[float], short_hours: float) -> Document:
    """Write a schedule with a shortfall of the row, in the words of a check of it."""
    replayed = answer(document | {"task": "check", "schedule": {"assets": [{"id": "quay-b1", "power_mw": powers}]}})
    assert isinstance(replayed, Schedule)
    return replayed.model_dump(mode="json") | {"shortfalls": [{**ROW, "amount": short_hours, "unit": "h"}]}


def _right() -> Document:
    """Return a diagnosis of SHORT, written by hand."""
    figures = {"commitment": "evening", "asset": "quay-b1", "required_hours": 3.0, "attainable_hours": 2.0}
    repairs = [_repair("hours", 3.0, 2.0, "h", 35.0), _repair("threshold/mw", 0.5, 0.33, "MW", 30.1)]
    return {
        "complete": True,
        "summary": "3 h at 0.5 MW need 1.5 MWh.",
        "conflicts": [{"irreducible": True, "members": [ROW, STORED_ENERGY]}],
        "attainable": [figures],
        "repairs": repairs,
        "nearest_schedule": _nearest(SHORT, [0.0, 0.0, 0.5, 0.5], 1.0),
        "cautions": ["advisory"],
    }


def _said_of(document: Document, diagnosis: Document) -> list[str]:
    return faults_of(document, Diagnosis.model_validate(diagnosis))


def test_a_right_diagnosis_is_found_right() -> None:
    assert _said_of(SHORT, _right()) == []


def _members(*members: Document) -> Callable[[Document], None]:
    def plant(said: Document) -> None:
        said["conflicts"][0]["members"] = list(members)

    return plant


def _into(*path: Any, value: Any) -> Callable[[Document], None]:
    def plant(said: Document) -> None:
        place: Any = said
        for step in path[:-1]:
            place = place[step]
        place[path[-1]] = value

    return plant


def _twice(name: str) -> Callable[[Document], None]:
    return lambda said: said[name].append(said[name][0])


def _limits_repair(said: Document) -> None:
    said["repairs"][0]["change"]["lever"] = "limits"


def _patch_more(said: Document) -> None:
    said["repairs"][0]["patch"].append({"op": "replace", "path": "/targets/quay-b1/final_stored_mwh", "value": 0.1})


def _hours_and_threshold(said: Document) -> None:
    first, second = said["repairs"]
    first["changes"] = [first["change"], second["change"]]
    first["patch"] += second["patch"]


PLANTED: dict[str, tuple[Callable[[Document], None], str]] = {
    "a member too many": (_members(ROW, STORED_ENERGY, TARGET), "is impossible without /targets/quay-b1"),
    "a member too few": (_members(ROW), "is possible"),
    "a member twice": (_members(ROW, STORED_ENERGY, STORED_ENERGY), "names a member twice"),
    "a row without its asset": (_members(ROW | {"asset": None}, STORED_ENERGY), "is no element"),
    "physics as a member": (_members(ROW, {"pointer": "/fleet/assets/0/discharge_limit_mw", "text": ""}), "no element"),
    "no conflict": (_into("conflicts", value=[]), "no conflict is named"),
    "a conflict twice": (_twice("conflicts"), "named twice"),
    "a reducible conflict": (_into("conflicts", 0, "irreducible", value=False), "not irreducible in a complete"),
    "too much attainable": (
        _into("attainable", 0, "attainable_hours", value=3.0),
        "3.0 hours of 3.0, the oracle says [2.0]",
    ),
    "too little attainable": (
        _into("attainable", 0, "attainable_hours", value=1.0),
        "1.0 hours of 3.0, the oracle says",
    ),
    "another figure asked for": (_into("attainable", 0, "required_hours", value=4.0), "asked are 3.0"),
    "attainable in another unit": (_into("attainable", 0, "attainable_hours", value=None), "no figures in hours"),
    "attainable of another": (_into("attainable", 0, "commitment", value="morning"), "about no binding row"),
    "nothing attainable": (_into("attainable", value=[]), "nothing says what"),
    "left out for nothing": (
        _into("attainable", 0, "left_out", value=[TARGET["pointer"]]),
        "leaving out of nothing is",
    ),
    "left out that is nothing": (_into("attainable", 0, "left_out", value=["/outages/0"]), "names no other element"),
    "a repair too large": (
        lambda said: said["repairs"].__setitem__(0, _repair("hours", 3.0, 1.0, "h", 40.0)),
        "one step less cures, too",
    ),
    "a threshold too low": (
        lambda said: said["repairs"].__setitem__(1, _repair("threshold/mw", 0.5, 0.32, "MW", 30.3)),
        "one step less cures, too",
    ),
    "a repair too small": (
        lambda said: said["repairs"].__setitem__(1, _repair("threshold/mw", 0.5, 0.34, "MW", 30.1)),
        "the oracle says infeasible",
    ),
    "a margin too high": (
        lambda said: said["repairs"][0].update(margin=36.0, margin_bound=36.0),
        "margin 36.0..36.0, the oracle says 35",
    ),
    "a bound below the margin": (_into("repairs", 0, "margin_bound", value=34.0), "margin 35.0 above its bound"),
    "the worst first": (lambda said: said["repairs"].reverse(), "not sorted by margin"),
    "not verified": (_into("repairs", 0, "verified", value=False), "not verified"),
    "from what never was": (_into("repairs", 0, "change", "from", value=5.0), "is 3.0, not 5.0"),
    "to what does not become": (_into("repairs", 0, "change", "to", value=1.0), "becomes 2.0, not 1.0"),
    "a lever not asked for": (_limits_repair, "the lever limits was not asked for"),
    "a patch that does more": (_patch_more, "which no change names"),
    "a patch of nothing": (_into("repairs", 0, "patch", 0, "path", value="/commitments/4/hours"), "gives no valid job"),
    "a patch to an invalid job": (_into("repairs", 0, "patch", 0, "value", value=-1.0), "gives no valid job"),
    "another change first": (_into("repairs", 0, "changes", value=[]), "not the first of its changes"),
    "two changes for one": (_hours_and_threshold, "cures without the change at /commitments/0/threshold/mw"),
    "no repair": (_into("repairs", value=[]), "no repair of the lever commitments is offered"),
    "no nearest schedule": (_into("nearest_schedule", value=None), "though there is one"),
    "a nearest schedule that breaks more": (
        _into("nearest_schedule", "assets", 0, "power_mw", value=[0.0, 0.0, 0.6, 0.5]),
        "is in no shortfall",
    ),
    "a nearest schedule that misses more": (
        lambda said: said.update(nearest_schedule=_nearest(SHORT, [0.0, 0.0, 0.0, 0.5], 2.0)),
        "2.0 short in all",
    ),
    "a shortfall that is none": (
        lambda said: said["nearest_schedule"]["shortfalls"].append({**TARGET, "amount": 0.1, "unit": "MWh"}),
        "of 0.1 MWh is none",
    ),
    "a shortfall of physics": (
        _into("nearest_schedule", "shortfalls", 0, "pointer", value="/fleet/assets/0/charge_limit_mw"),
        "about no row, target or limit",
    ),
    "a negative shortfall": (_into("nearest_schedule", "shortfalls", 0, "amount", value=-1.0), "of -1.0"),
    "no summary": (_into("summary", value=""), "no summary"),
}


@pytest.mark.parametrize("fault", PLANTED)
def test_a_fault_planted_in_a_right_diagnosis_is_noticed(fault: str) -> None:
    plant, sentence = PLANTED[fault]
    said = json.loads(json.dumps(_right()))
    for repair in said["repairs"]:
        repair["changes"] = [repair["change"]]  # the same object, so that a fault in one is in both
    plant(said)
    assert any(sentence in fault for fault in _said_of(SHORT, said)), _said_of(SHORT, said)


def test_a_conflict_that_a_complete_diagnosis_leaves_out_is_noticed() -> None:
    # Two conflicts: 3 h at 0.5 MW are more than is stored; and 0.3 MW are more than the outage leaves in the last hour.
    due = {"id": "late", "kind": "firm_delivery", "applies_to": {"assets": ["quay-b1"]}, "power_mw": [0, 0, 0, 0.3]}
    twofold = SHORT | {"commitments": [*SHORT["commitments"], due], "outages": [outage("quay-b1", 3, 4, 0.2)]}
    found = answer(twofold)
    assert isinstance(found, Diagnosis)
    said = found.model_dump(by_alias=True)
    assert len(said["conflicts"]) == 2
    said["conflicts"].pop()
    assert any("does not name the conflict" in fault for fault in _said_of(twofold, said))
    said["complete"] = False
    assert not any("does not name the conflict" in fault for fault in _said_of(twofold, said))


@pytest.mark.parametrize("lever", ["planned_outages", "targets", "initial_energy", "limits"])
def test_a_lever_that_cures_and_is_not_offered_is_noticed(lever: str) -> None:
    levers = ["commitments", "targets", "planned_outages", "initial_energy", "limits"]
    asked = hours({"assets": ["quay-b1"]}, 1.0, 0.5)
    plant = store(charge_limit_mw=0.0, site="quay")
    out = outage("quay-b1", 0, 3) | {"kind": "planned"}
    document = {
        "planned_outages": job(
            [1.0] * 3, plant, stored=1.0, sites=[{"id": "quay"}], commitments=[asked], outages=[out]
        ),
        "targets": job([1.0] * 3, plant, stored=1.0, final=0.8, sites=[{"id": "quay"}], commitments=[asked]),
        "initial_energy": job([1.0] * 3, plant, stored=0.2, sites=[{"id": "quay"}], commitments=[asked]),
        "limits": job(
            [1.0] * 3, plant, stored=1.0, sites=[{"id": "quay", "export_limit_mw": 0.2}], commitments=[asked]
        ),
    }[lever] | {"levers": levers}
    found = answer(document)
    assert isinstance(found, Diagnosis)
    said = found.model_dump(by_alias=True)
    sentence = f"no repair of the lever {lever} is offered"
    assert not any(sentence in fault for fault in _said_of(document, said))
    said["repairs"] = [repair for repair in said["repairs"] if repair["change"]["lever"] != lever]
    assert any(sentence in fault for fault in _said_of(document, said))
