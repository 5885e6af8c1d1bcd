"""Generate small valid jobs that cannot be met, of every kind of asset, commitment and element that may be to blame.

The same seed gives the same job. A random job is drawn, then tightened at random - more hours, outages, higher targets,
lower limits - until the oracle finds nothing that meets it. Each seed aims at one kind of element: where a few attempts
bring forth a conflict that needs one of that kind, that job is taken. Physics alone can always be met.
"""

from __future__ import annotations

import random
from collections.abc import Sequence

from tests.oracles.elements import Element, elements, kind_of
from tests.oracles.formulation_clock import Job
from tests.oracles.leaving_out import is_possible_alone, is_possible_without
from tests.oracles.random_mixed import mixed_request
from tests.oracles.random_requests import request
from tests.oracles.random_tightening import Tightening

AIMS: dict[str, tuple[str, ...]] = {
    "hours_at_least": ("more_hours", "more_hours", "commitment", "bound"),
    "hours_at_most": ("fewer_hours", "fewer_hours", "commitment", "bound", "more_energy"),
    "firm_delivery": ("more_firm_power", "commitment", "bound"),
    "energy_at_least": ("more_energy", "commitment", "bound"),
    "energy_at_most": ("less_energy", "less_energy", "commitment", "bound", "more_hours"),
    "reserve_holding": ("more_reserve", "commitment", "bound"),
    "final_stored_mwh": ("higher_target", "outage"),
    "initial energy": ("less_stored", "higher_target", "more_firm_power"),
    "planned outage": ("outage", "outage", "higher_target", "more_hours", "larger_need"),
    "forced outage": ("outage", "outage", "more_firm_power", "larger_need"),
    "export_limit_mw": ("lower_limit", "lower_limit", "no_curtailment", "more_energy", "more_hours", "longer_times"),
    "import_limit_mw": ("lower_limit", "lower_limit", "more_load", "larger_need", "higher_target"),
    "energy need": ("larger_need", "larger_need", "lower_limit", "outage"),
    "min_stored_mwh": ("higher_floor", "higher_floor", "more_hours", "more_energy", "more_reserve"),
    "max_cycles_per_day": ("fewer_cycles", "more_energy", "more_hours", "more_firm_power"),
    "max_starts_per_day": ("fewer_starts", "more_hours", "more_firm_power", "higher_target"),
    "min_run_hours": ("longer_times", "more_firm_power", "fewer_hours", "less_energy", "lower_limit"),
    "min_rest_hours": ("longer_times", "more_hours", "more_firm_power", "higher_target"),
    "min_up_hours": ("longer_times", "lower_limit", "fewer_hours", "less_energy"),
    "min_down_hours": ("longer_times", "more_firm_power", "more_hours", "more_energy"),
    "ramp_mw_per_hour": ("slower_ramp", "slower_ramp", "more_firm_power", "more_hours", "higher_target"),
    "ramp_up_mw_per_hour": ("slower_ramp", "slower_ramp", "more_firm_power", "more_energy"),
    "ramp_down_mw_per_hour": ("slower_ramp", "slower_ramp", "fewer_hours", "lower_limit", "less_energy"),
}
KIND_NEEDED = {
    "storage": (
        "final_stored_mwh",
        "initial energy",
        "min_stored_mwh",
        "max_cycles_per_day",
        "max_starts_per_day",
        "min_run_hours",
        "min_rest_hours",
        "ramp_mw_per_hour",
    ),
    "generator": ("min_up_hours", "min_down_hours", "ramp_up_mw_per_hour", "ramp_down_mw_per_hour"),
    "flexible_load": ("energy need",),
}
ATTEMPTS = 3
FIRST_TIGHTENINGS = 2
MOST_TIGHTENINGS = 9


def infeasible_request(seed: int) -> Job:
    """Return a job that the oracle proves cannot be met, of 1-4 assets over 4-12 intervals."""
    draw = random.Random(seed)
    aim = list(AIMS)[seed % len(AIMS)]
    second_best: Job | None = None
    attempts = 0
    while attempts < ATTEMPTS or second_best is None:
        attempts += 1
        job = _tightened(draw, aim)
        if job is None:
            continue
        if any(kind_of(job, element) == aim for element in a_conflict(job, aim)):
            return job
        second_best = job
    return second_best


def a_conflict(job: Job, aim: str = "") -> list[Element]:
    """Return elements that cannot hold together, each tried and needed; those of the kind `aim` are tried last."""
    everything = elements(job)
    kept = list(everything)
    for element in sorted(everything, key=lambda element: kind_of(job, element) == aim):
        fewer = [other for other in kept if other != element]
        if not is_possible_alone(job, fewer):
            kept = fewer
    return kept


def _tightened(draw: random.Random, aim: str) -> Job | None:
    """Draw a job and tighten it until it cannot be met; None where it still can, or where physics alone is to blame."""
    job = _drawn(draw)
    while not _suits(job, aim):
        job = _drawn(draw)
    tightening = Tightening(draw, job)
    ways: Sequence[str] = AIMS[aim]
    for n in range(MOST_TIGHTENINGS):
        tightening.apply(
            ways[0] if n == 0 else draw.choice(ways) if draw.random() < 0.75 else draw.choice(tightening.ways)
        )
        if n >= FIRST_TIGHTENINGS and not is_possible_without(job, ()):
            return job if is_possible_alone(job, ()) else None
    return None


def _suits(job: Job, aim: str) -> bool:
    """Tell whether a job has what an element of the kind aimed at is about."""
    kinds = {asset["kind"] for asset in job["fleet"]["assets"]}
    needed = {kind for kind, aims in KIND_NEEDED.items() if aim in aims}
    return needed <= kinds and (aim != "reserve_holding" or "reserve_products" in job["window"])


def _drawn(draw: random.Random) -> Job:
    """Draw what is tightened then: mostly of two or three assets, now and then a lone one or stores alone."""
    assets, intervals = draw.choice([1, 2, 2, 2, 3, 3, 4]), draw.choice([4, 4, 5, 5, 6, 6, 7, 8, 10, 12])
    seed = draw.randrange(1_000_000)
    if draw.random() < 0.15:
        job = request(seed, assets=min(assets, 3), intervals=intervals, coupled=assets > 1)
    else:
        job = mixed_request(seed, assets=assets, intervals=intervals, coupled=False if assets == 1 else None)
    lottery = draw.random()
    if lottery < 0.3:
        job["levers"] = ["commitments", "targets", "planned_outages", "initial_energy", "limits"]
    elif lottery < 0.4:
        job["levers"] = draw.sample(["commitments", "targets", "planned_outages", "initial_energy", "limits"], 2)
    return job
