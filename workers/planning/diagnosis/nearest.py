"""The schedule that comes nearest: least missing in total, then the best margin at that.

Rows, targets and limits are priced, each MWh missing alike (an hour at a threshold counts as the energy it stands for);
a connection is exceeded only where nothing else helps. What is then missing is asked no more, and the rest is planned
for money as ever. The audit judges it by the request relaxed by what is listed as missing.
"""

from collections.abc import Callable, Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial

import numpy as np

from schemas.diagnosis import Shortfall
from schemas.job import ScheduleJob
from schemas.quantities import LARGEST
from workers.planning.assembly import UnitPlan
from workers.planning.diagnosis import lone_store
from workers.planning.diagnosis.again import Planner, choice_of, key_of
from workers.planning.diagnosis.attainable import is_ceiling
from workers.planning.diagnosis.elements import SIDES, words_of
from workers.planning.diagnosis.feasibility import Solving, most_energy, without_money
from workers.planning.diagnosis.levers.connections import with_limit
from workers.planning.diagnosis.levers.energy import with_target
from workers.planning.diagnosis.scope import Question
from workers.planning.diagnosis.shortfall import ROOM, Lowered, Raised, final_energy, lowered, raised
from workers.planning.instance import Instance, Meter
from workers.planning.methods import Found
from workers.planning.parts import independent_parts
from workers.planning.rows import CeilingRow, CommitmentRow, HoursRow
from workers.planning.solvers.ending import Stopped
from workers.planning.store import Store
from workers.planning.units import Unit

EXCESS_PRICE = 1000.0
"""What a MWh beyond a connection's limit counts, against 1 for a MWh of a commitment or a target."""

WORTH_NAMING = 1e-6
"""Less is within the audit's tolerance, MWh or hours."""

GRAIN_MWH = 0.01
"""The total that is missing is the least to this much, MWh, or to `GRAIN_SHARE` of itself."""

GRAIN_SHARE = 1e-3

SHARE = 0.2
LEAST_SECONDS = 1.0
"""The search for the least may take this share of the time left, or so many seconds; then the best it has is taken."""

PRICES = {
    "hours_at_least": "shortfall_price_per_hour",
    "hours_at_most": "shortfall_price_per_hour",
    "firm_delivery": "shortfall_price_per_mwh",
    "energy_at_least": "shortfall_price_per_mwh",
    "energy_at_most": "shortfall_price_per_mwh",
    "reserve_holding": "shortfall_price_per_mw_per_hour",
}


@dataclass(frozen=True)
class Nearest:
    """Parts as they were solved, what each misses, and the request relaxed by just that."""

    job: ScheduleJob
    found: Found
    missing: tuple[Shortfall, ...]


def nearest(
    question: Question, infeasible: Collection[tuple[str, ...]], planner: Planner, solving: Solving
) -> Nearest | None:
    """Find the nearest schedule; None where what is never priced leaves none. Raises CutShort."""
    originals = independent_parts(question.instance)
    parts, solutions, job = [], [], question.job
    missing: list[Shortfall] = []
    for original in originals:
        part, start = original, None
        if key_of(original) in infeasible:
            start = least_missing(original, solving)
            if start is None:
                return None
            part = _asking_no_more(original, start)
        solution = planner.solution(part, solving, start)
        if solution.plans is None:
            raise solving.cut_short()
        parts.append(part)
        solutions.append(solution)
        for shortfall, relax in _missing(question, original, solution.plans):
            missing.append(shortfall)
            job = relax(job)
    return Nearest(job, Found(choice_of(tuple(parts)), tuple(solutions)), tuple(missing))


def least_missing(part: Instance, solving: Solving) -> tuple[UnitPlan, ...] | None:
    """Find what a part does with the least missing in total; None where nothing can be done."""
    solving.require_time()
    alone = lone_store.least_missing(part, _weight)
    if alone is not None:
        return (alone,)
    bare = without_money(part, GRAIN_MWH / 10 / (3 * most_energy(part) + 1))
    found = solving.solve(
        replace(
            bare,
            rows=tuple(replace(row, price=_weight(row)) for row in bare.rows),
            units=tuple(replace(u, target_price=1.0) if isinstance(u, Store) else u for u in bare.units),
            meters=tuple(replace(meter, excess_price=EXCESS_PRICE) for meter in bare.meters),
            fleet=replace(bare.fleet, excess_price=EXCESS_PRICE),
            relative_gap=GRAIN_SHARE,
            absolute_gap=GRAIN_MWH,
        ),
        max(LEAST_SECONDS, SHARE * solving.seconds_left),
    )
    if found.stopped is Stopped.INFEASIBLE:
        return None
    if found.plans is None:
        raise solving.cut_short()
    return found.plans


def _asking_no_more(part: Instance, plans: tuple[UnitPlan, ...]) -> Instance:
    """Ask of a part no more than a schedule gives."""
    return replace(
        part,
        rows=tuple(lowered(row, plans, part.hours).row if row.price is None else row for row in part.rows),
        units=tuple(_lowered_unit(unit, plan, part.hours) for unit, plan in zip(part.units, plans, strict=True)),
        meters=tuple(raised(meter, plans, part).meter for meter in part.meters),
        fleet=raised(part.fleet, plans, part).meter,
    )


def _weight(row: CommitmentRow) -> float:
    """Weigh an hour missing as the energy it stands for, all else by MWh."""
    if isinstance(row, HoursRow):
        return max(row.threshold_mw, 1e-3)
    return max(row.threshold_mw, 1.0) if isinstance(row, CeilingRow) else 1.0


def _lowered_unit(unit: Unit, plan: UnitPlan, hours: float) -> Unit:
    if not isinstance(unit, Store):
        return unit
    reached = final_energy(unit, plan, hours)
    if reached >= unit.final_floor_mwh - ROOM:
        return unit
    return replace(unit, final_floor_mwh=max(reached - ROOM, 0.0))


Relaxing = tuple[Shortfall, Callable[[ScheduleJob], ScheduleJob]]


def _missing(question: Question, part: Instance, plans: Sequence[UnitPlan]) -> Iterator[Relaxing]:
    """List what a schedule misses of a part, each with the change of the request that asks no more than is there."""
    for row in part.rows:
        if row.price is None:
            yield from _missing_of_row(row, lowered(row, plans, part.hours))
    for unit, plan in zip(part.units, plans, strict=True):
        if isinstance(unit, Store):
            yield from _missing_of_target(unit, final_energy(unit, plan, part.hours))
    for meter in part.connections:
        places = {element.name: element.pointer for element in question.of_meters.get(meter.id, ())}
        yield from _beyond_limits(meter, raised(meter, plans, part), places)


def _missing_of_row(row: CommitmentRow, less: Lowered) -> Iterator[Relaxing]:
    if less.missing > WORTH_NAMING:
        text = f"{words_of(row)}; {less.missing:.4g} {less.unit} {'over' if is_ceiling(row) else 'missing'}"
        amount = round(less.missing, 6)
        shortfall = Shortfall(
            pointer=row.pointer, text=text, asset=row.asset, day=row.day, amount=amount, unit=less.unit
        )
        yield shortfall, partial(_with_price, row.commitment)


def _missing_of_target(store: Store, reached: float) -> Iterator[Relaxing]:
    missing = store.final_floor_mwh - reached
    if missing > WORTH_NAMING:
        text = f"{store.id} ends with {reached:.4g} MWh, {missing:.4g} MWh below its target"
        pointer = f"/targets/{store.id}/final_stored_mwh"
        shortfall = Shortfall(pointer=pointer, text=text, asset=store.id, amount=round(missing, 6), unit="MWh")
        yield shortfall, partial(with_target, asset=store.id, final_mwh=max(reached - WORTH_NAMING, 0.0))


def _beyond_limits(meter: Meter, higher: Raised, places: Mapping[str, str]) -> Iterator[Relaxing]:
    for side, amount in higher.exceeded.items():
        text = f"{SIDES[side]} of {meter.id} exceeded by up to {amount:.4g} MW"
        shortfall = Shortfall(pointer=places[side], text=text, amount=round(amount, 6), unit="MW")
        limit_mw = [float(value) if np.isfinite(value) else LARGEST for value in getattr(higher.meter, side)]
        yield shortfall, partial(with_limit, meter=meter.id, side=side, limit_mw=limit_mw)


def _with_price(number: int, job: ScheduleJob) -> ScheduleJob:
    commitments = list(job.commitments)
    kind = commitments[number].kind
    commitments[number] = commitments[number].model_copy(update={PRICES[kind]: 0.0})
    return job.model_copy(update={"commitments": commitments})
