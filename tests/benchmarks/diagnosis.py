"""Measure how long the diagnosis of one store takes beside a feasible plan of it.

    python -m tests.benchmarks.diagnosis [--rounds 5]

Every round invents a store of 96 intervals with a commitment that fits, plans it by `milp`, makes it impossible in one
of several ways, diagnoses that, and plans the request that the first repair cures, one after the other in one process.
Counted from the call: until the first conflict, what is attainable and one repair that was planned; and until the whole
answer. Both are held against the plan that fits and against the plan that the first repair allows, which asks for the
utmost. Ratios are taken round by round: their median, and the largest.
"""

import argparse
from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime
from itertools import product
from statistics import median
from time import perf_counter
from typing import Any

import jsonpatch

from schemas.diagnosis import Diagnosis
from schemas.reading import read_job
from schemas.schedule import Schedule
from tests.benchmarks import fleets
from workers.planning.diagnosis.diagnose import FIRST_REPAIR
from workers.planning.limits import Limits, Unwatched
from workers.planning.plan import plan

Request = dict[str, Any]


def tripped(request: Request) -> Request:
    """Take the store out by force until the late evening."""
    outage = {"kind": "forced", "from": _at(request, 6), "to": _at(request, 23)}
    return request | {"outages": [outage | {"asset": _store(request)["id"]}]}


def maintained(request: Request) -> Request:
    """Plan maintenance through the afternoon."""
    outage = {"kind": "planned", "from": _at(request, 4), "to": _at(request, 22)}
    return request | {"outages": [outage | {"asset": _store(request)["id"]}]}


def asked_too_long(request: Request) -> Request:
    """Ask for twice and a half the hours."""
    request["commitments"][0]["hours"] = min(23.0, round(request["commitments"][0]["hours"] * 2.5 * 4) / 4 + 1)
    return request


def full_at_the_end(request: Request) -> Request:
    """Ask for the hours at the very end of the day, and for a full store after them."""
    hours = request["commitments"][0]["hours"]
    request["commitments"][0]["from"] = _at(request, 24 - hours - 0.25)
    capacity = _store(request).get("max_stored_mwh", _store(request)["energy_capacity_mwh"])
    return request | {"targets": {_store(request)["id"]: {"final_stored_mwh": capacity}}}


def worn_out(request: Request) -> Request:
    """Allow a fifth of a cycle."""
    _store(request)["max_cycles_per_day"] = 0.2
    return request


def plain(request: Request) -> Request:
    """Leave the store as it is."""
    return request


def particular(request: Request) -> Request:
    """Give the store least powers, runs, rests and a ramp, and ask for its hours in blocks of two."""
    power = _store(request)["discharge_limit_mw"]
    _store(request).update(
        min_discharge_mw=round(0.2 * power, 3),
        min_charge_mw=round(0.2 * power, 3),
        min_run_hours=1.0,
        min_rest_hours=0.5,
        ramp_mw_per_hour=round(2.5 * power, 3),
    )
    request["commitments"][0]["min_block_hours"] = 2.0
    return request


STORES: tuple[Callable[[Request], Request], ...] = (plain, particular)
WAYS: tuple[Callable[[Request], Request], ...] = (tripped, maintained, asked_too_long, full_at_the_end, worn_out)


def _store(request: Request) -> dict[str, Any]:
    store: dict[str, Any] = request["fleet"]["assets"][0]
    return store


def _at(request: Request, hour: float) -> str:
    day = request["window"]["start"][:10]
    return f"{day}T{int(hour):02d}:{round(hour % 1 * 60):02d}:00+00:00"


class Stopwatch(Unwatched):
    """Notes when the first repair was planned."""

    def __init__(self) -> None:
        self.began = perf_counter()
        self.first_repair: float | None = None

    def progress(self, phase: str, done: float) -> None:
        """Take the time."""
        if phase == "diagnosing" and done >= FIRST_REPAIR and self.first_repair is None:
            self.first_repair = perf_counter() - self.began


def measure(request: Request) -> tuple[Schedule | Diagnosis, float, float]:
    """Plan a request; give the answer, the seconds until the first repair (or the end), and until the end."""
    job = read_job(request | {"method": "milp"})
    watch = Stopwatch()
    answer = plan(job, Limits.of(job, datetime.now(UTC)), watch)
    seconds = perf_counter() - watch.began
    assert isinstance(answer, Schedule | Diagnosis)
    return answer, watch.first_repair or seconds, seconds


@dataclass(frozen=True)
class Round:
    """Seconds of the plan that fits, of the diagnosis until its first repair and its end, of the plan it cures."""

    fits: float
    to_repair: float
    to_end: float
    cured: float
    is_complete: bool
    repairs: int


def one_round(kind: Callable[[Request], Request], way: Callable[[Request], Request], seed: int) -> Round | None:
    """Measure one way for one store; None where the change does not make it impossible."""
    fitting, impossible = kind(fleets.uncoupled(1, seed=seed)), way(kind(fleets.uncoupled(1, seed=seed)))
    fits, _, seconds = measure(fitting)
    found, to_repair, to_end = measure(impossible)
    if not isinstance(fits, Schedule) or not isinstance(found, Diagnosis) or not found.repairs:
        return None
    hours = min(found.repairs, key=lambda repair: repair.change.lever != "commitments" or repair.change.unit != "h")
    cured, _, again = measure(jsonpatch.apply_patch(impossible, hours.patch))
    assert isinstance(cured, Schedule)
    return Round(seconds, to_repair, to_end, again, found.complete, len(found.repairs))


def main() -> None:
    """Print a table of ratios."""
    parser = argparse.ArgumentParser(description="Diagnoses beside feasible plans of the same store.")
    parser.add_argument("--rounds", type=int, default=5)
    rounds = parser.parse_args().rounds
    measure(fleets.uncoupled(1, seed=0))
    print("ratios: time to the first repair / plan that fits, / plan that is cured; the same of the whole answer")
    print("| store | fails by | plan s | first/fits | first/cured | whole/fits | whole/cured | complete | repairs |")
    print("|---|---|---|---|---|---|---|---|---|")
    for kind, way in product(STORES, WAYS):
        measured = [one for seed in range(rounds) if (one := one_round(kind, way, seed))]
        if measured:
            print(row(f"{kind.__name__} | {way.__name__.replace('_', ' ')}", measured), flush=True)


def row(name: str, measured: list[Round]) -> str:
    """Write a line of the table: medians, the largest in brackets."""

    def ratio(of: Callable[[Round], float]) -> str:
        ratios = [of(one) for one in measured]
        return f"{median(ratios):.1f} ({max(ratios):.1f})"

    cells = (
        name,
        f"{median(one.fits for one in measured):.3f}",
        ratio(lambda one: one.to_repair / one.fits),
        ratio(lambda one: one.to_repair / one.cured),
        ratio(lambda one: one.to_end / one.fits),
        ratio(lambda one: one.to_end / one.cured),
        f"{sum(one.is_complete for one in measured)} of {len(measured)}",
        f"{min(one.repairs for one in measured)}-{max(one.repairs for one in measured)}",
    )
    return f"| {' | '.join(cells)} |"


if __name__ == "__main__":
    main()
