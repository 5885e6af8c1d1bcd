"""Leave elements of a job out, and tell by the oracle whether the rest can be met.

Leaving out is literal, as if the job did not say it: a row is not asked, a store ends with whatever is left and starts
with whatever serves best, an outage is not there, a limit does not limit. Physics always holds.

Leaving out is no relaxation in a few corners. Ramps bind again into an interval whose outage is left out, a run is no
longer cut short by it, and what it kept from being generated is. Without its need a load draws nothing, which may be
what a minimum of generation or a commitment to draw lives on. The reserve of an island with one limit left counts
against that limit, and energy beyond a store's range at the start widens its bounds only while it is stated.
"""

from __future__ import annotations

from collections.abc import Collection
from copy import deepcopy
from typing import Any

from tests.oracles.elements import Element, elements, row_keys, target_mwh
from tests.oracles.formulation import formulate
from tests.oracles.formulation_clock import Clock, Job, given, read_clock, series, spans
from tests.oracles.formulation_commitments import add_commitments
from tests.oracles.formulation_program import Affine, Program
from tests.oracles.formulation_storage import opening

SECONDS = 30.0
SECONDS_AT_BEST = 10.0


def is_possible_without(job: Job, left_out: Collection[Element]) -> bool:
    """Tell whether what is left can be met.

    Raises ValueError where one of `left_out` is no element of the job.
    """
    program, _, _ = _formulated(job, left_out)
    return program.can_be_met(SECONDS)


def is_possible_alone(job: Job, kept: Collection[Element]) -> bool:
    """Tell whether some elements can be met with physics alone, every other one left out."""
    everything = elements(job)
    if unknown := set(kept) - set(everything):
        raise ValueError("no elements of this job", unknown)
    return is_possible_without(job, [element for element in everything if element not in kept])


def most_of(job: Job, row: Element, left_out: Collection[Element]) -> float | None:
    """Return the most (of an `*_at_most` row the least) a row can reach with all but `left_out` held.

    In h, MWh or MW times h and to 1e-3 of those, what was counted before in it; hours beyond what is asked, too. None
    where the rest cannot hold even if the row asks nothing. Raises RuntimeError where the solver comes to no end.
    """
    program, powers, clock = _formulated(job, [*left_out, row])
    program.value, program.squares = Affine({}), []
    commitment = deepcopy(job["commitments"][int(row.steps[1])])
    asked = _priced_at_one(commitment, row, clock)
    alone: Job = {**job, "commitments": [commitment]}
    others = {key for key in row_keys(alone, clock) if key[1:] != row.row[1:]}
    add_commitments(program, alone, powers, clock, others)
    found = program.solve(1e-6, SECONDS_AT_BEST)
    value = found.value if found.status == 0 else _bisected(program) if found.status in (1, 4) else None
    if value is None:
        return None
    return -value if commitment["kind"].endswith("at_most") else asked + value


def _bisected(program: Program) -> float | None:
    """Return the best value of a program to 1e-3, asking only what is possible; None where nothing is.

    The HiGHS in scipy now and then ends in time-outs and errors where each single question has a quick answer.
    """
    value = program.value
    low, high = program.smallest(value), program.largest(value)
    if not program.can_be_met(SECONDS):
        return None
    while high - low > 1e-3:
        middle = (low + high) / 2.0
        program.at_least(value, middle)
        low, high = (middle, high) if program.can_be_met(SECONDS) else (low, middle)
        program.rows.pop()
    return low


def amount_due(job: Job, row: Element) -> float:
    """Return what a row asks for, in h, MWh or MW times h."""
    clock, commitment = read_clock(job["window"]), job["commitments"][int(row.steps[1])]
    if "hours" in commitment:
        return float(commitment["hours"])
    return float(commitment["energy_mwh"]) if "energy_mwh" in commitment else _due(commitment, row, clock)


def _priced_at_one(commitment: dict[str, Any], row: Element, clock: Clock) -> float:
    """Ask a commitment for all hours there are, missing some of it costing 1 a unit; return what is asked."""
    kind = commitment["kind"]
    span = clock.hours * len(clock)
    if kind.startswith("hours"):
        commitment["shortfall_price_per_hour"] = 1.0
        commitment["hours"] = 0.0 if kind == "hours_at_most" else span + commitment["hours"] + 100.0
        return float(commitment["hours"])
    name = "shortfall_price_per_mw_per_hour" if kind == "reserve_holding" else "shortfall_price_per_mwh"
    commitment[name] = 1.0
    if kind == "energy_at_most":
        commitment["energy_mwh"] = 0.0
    return float(commitment["energy_mwh"]) if "energy_mwh" in commitment else _due(commitment, row, clock)


def _due(commitment: dict[str, Any], row: Element, clock: Clock) -> float:
    """Add up a series of power over the intervals in which it is due, times h."""
    due = series(commitment["power_mw"], len(clock))
    excused = {t for span in given(commitment, "excused", []) for t in clock.inside(span.get("from"), span.get("to"))}
    days = {None if span.day is None else span.day.isoformat(): span.intervals for span in spans(commitment, clock)}
    return clock.hours * sum(due[t] for t in days[row.day] if t not in excused)


def _formulated(job: Job, left_out: Collection[Element]) -> tuple[Program, Any, Clock]:
    """Write down what is left of a job."""
    if unknown := set(left_out) - set(elements(job)):
        raise ValueError("no elements of this job", unknown)
    rest, clock = _with_defaults(job), read_clock(job["window"])
    gone: dict[str, list[Element]] = {}
    for element in left_out:
        gone.setdefault(element.steps[0], []).append(element)
    for element in [*gone.get("limits", []), *gone.get("fleet", [])]:
        _remove_from_fleet(rest, element.steps)
    for element in gone.get("targets", []):
        rest["targets"][element.steps[1]]["final_stored_mwh"] = 0.0
    outages = {int(element.steps[1]) for element in gone.get("outages", [])}
    rest["outages"] = [outage for n, outage in enumerate(given(rest, "outages", [])) if n not in outages]
    needs = {(element.steps[1], int(element.steps[2])) for element in gone.get("energy_needs", [])}
    rest["energy_needs"] = {
        asset_id: [need for n, need in enumerate(listed) if (asset_id, n) not in needs]
        for asset_id, listed in given(rest, "energy_needs", {}).items()
    }
    program, powers = formulate(
        rest,
        clock,
        without_rows={element.row for element in gone.get("commitments", [])},
        free_energies={element.steps[1] for element in gone.get("initial", [])},
    )
    return program, powers, clock


def _with_defaults(job: Job) -> Job:
    """Return a copy in which each store says what it starts and ends with: what was assumed stays, whatever goes."""
    rest, clock = deepcopy(job), read_clock(job["window"])
    for asset in rest["fleet"]["assets"]:
        stored = opening(job, asset, clock).stored_mwh if asset["kind"] == "storage" else None
        if stored is None:
            continue
        rest["initial"] = given(rest, "initial", {})
        rest["initial"][asset["id"]] = given(rest["initial"], asset["id"], {"stored_mwh": stored})
        rest["targets"] = given(rest, "targets", {})
        target = given(rest["targets"], asset["id"], {})
        rest["targets"][asset["id"]] = target | {"final_stored_mwh": target_mwh(job, asset, clock)}
    return rest


def _remove_from_fleet(rest: Job, steps: list[str]) -> None:
    """Take away a limit, today's and the fleet's own, or a member of an asset."""
    member = steps[-1]
    if steps[:2] == ["fleet", "assets"]:
        rest["fleet"]["assets"][int(steps[2])].pop(member)
        return
    if steps[0] == "limits":
        rest["limits"][steps[1]][member] = None
    own = [site for site in given(rest["fleet"], "sites", []) if steps[:2] == ["limits", site["id"]]]
    if steps[:2] == ["fleet", "sites"]:
        own = [rest["fleet"]["sites"][int(steps[2])]]
    for meter in own or [rest["fleet"]]:
        meter[member] = None
