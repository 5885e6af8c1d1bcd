"""How far each commitment can be met: the least it must miss with everything else held."""

from collections.abc import Callable, Collection, Iterator, Sequence
from dataclasses import dataclass, field, replace
from math import ceil, floor

from schemas.commitments import Commitment, EnergyAtLeast, EnergyAtMost, HoursAtLeast, HoursAtMost
from workers.planning.diagnosis import lone_store
from workers.planning.diagnosis.elements import Element
from workers.planning.diagnosis.feasibility import Solving, most_energy, without_money
from workers.planning.diagnosis.localise import Trouble
from workers.planning.diagnosis.scope import Scope, row_of
from workers.planning.earlier import Earlier, plans_by_unit
from workers.planning.instance import Instance
from workers.planning.rows import CeilingRow, CommitmentRow, EnergyRow, FirmRow, HoldingRow, HoursRow
from workers.planning.store import whole_intervals

GRAIN_MWH = 0.01
"""Energies and reserve are told in steps of 0.01 MWh, rounded to the safe side."""

CLOSE = 0.02
"""All power that could flow costs this share of a grain, so that it never outweighs one."""


@dataclass(frozen=True)
class Reached:
    """What a commitment asks in a row and what it can have, in its unit; what else had to be left out for that.

    `plans` are what the units did for it, where a solver found it. Hours that time did not allow to prove to be the
    most are not `is_proven`.
    """

    row: CommitmentRow
    required: float
    attainable: float
    left_out: tuple[Element, ...]
    plans: Earlier
    is_proven: bool


@dataclass(frozen=True)
class Missing:
    """What is missing of a row, in its unit, by what the units do, where a solver found it; whether it is the least."""

    amount: float
    plans: Earlier = field(default_factory=dict)
    is_least: bool = True


def reached(trouble: Trouble, known: Collection[Element], solving: Solving) -> Iterator[Reached]:
    """Tell of every row in a conflict, but for those known, how far it can be met; raises CutShort."""
    scope = trouble.scope
    named = frozenset().union(*trouble.conflicts)
    for row in scope.instance.rows:
        if row.price is None and row_of(row) in named and row_of(row) not in known:
            left_out = _in_the_way(trouble, row_of(row), trouble.tester(solving))
            required = amount_asked(trouble.scope.question.job.commitments[row.commitment], row, scope.instance.hours)
            yield _attainable(scope, row, required, left_out, solving)


def _attainable(
    scope: Scope, row: CommitmentRow, required: float, left_out: Sequence[Element], solving: Solving
) -> Reached:
    """Give what a row can have at most (a ceiling: at least), in its unit, with all but `left_out` held.

    Hours may be more than are asked where something had to be left out.
    """
    asked, more = row, 0.0
    if isinstance(row, HoursRow) and left_out:
        asked = replace(row, due_hours=len(row.intervals) * scope.instance.hours)
        more = asked.due_hours - row.due_hours
    missing = solve_shortfall(scope.without(left_out), asked, solving)
    had = max(0.0, required + missing.amount if is_ceiling(row) else required + more - missing.amount)
    return Reached(row, required, had, tuple(left_out), missing.plans, missing.is_least)


def _in_the_way(trouble: Trouble, asked: Element, is_possible: Callable[[frozenset[Element]], bool]) -> list[Element]:
    """List what cannot be met whatever the row asks: all but it is held, conflicting elements one by one."""
    everything = frozenset(trouble.scope.elements) - {asked}
    if is_possible(everything):
        return []
    conflicting = frozenset().union(*(conflict for conflict in trouble.conflicts if asked not in conflict))
    kept = everything - conflicting
    left_out: list[Element] = []
    if not is_possible(kept):
        conflicting, kept = everything, frozenset()
    # in the order of the scope: facts of the plant first, then targets, then rows
    for element in (element for element in trouble.scope.elements if element in conflicting):
        if is_possible(kept | {element}):
            kept |= {element}
        else:
            left_out.append(element)
    return left_out


def solve_shortfall(instance: Instance, row: CommitmentRow, solving: Solving) -> Missing:
    """Price one row alone, and find the schedule that misses least of it; raises CutShort.

    Power that flows is worth or costs next to nothing, together less than `CLOSE` of a grain either way.
    """
    hours, grain = instance.hours, grain_of(row, instance.hours)
    if isinstance(row, HoursRow):
        solving.require_time()
        rows = tuple(row if row_of(other) == row_of(row) else other for other in instance.rows)
        most = lone_store.most_intervals(replace(instance, rows=rows), row)
        if most is not None:
            return Missing(max(0.0, row.due_hours - hours * min(most, whole_intervals(row.due_hours, hours))))
    bare = without_money(instance, CLOSE * grain / (3 * most_energy(instance) + 1))
    priced = tuple(replace(row, price=1.0) if row_of(other) == row_of(row) else other for other in bare.rows)
    # hours come in whole intervals: less than one of them open is none
    gap = grain * (1 - 5 * CLOSE if isinstance(row, HoursRow) else CLOSE)
    found = solving.solve(replace(bare, rows=priced, absolute_gap=gap, relative_gap=1e-9))
    if found.margin is None or found.plans is None:
        raise solving.cut_short()
    missed, proven, plans = -found.margin, -found.bound, plans_by_unit(instance, found.plans)
    if isinstance(row, HoursRow):
        had = _most_intervals(row, missed, hours)
        most = min(whole_intervals(row.due_hours, hours), floor((row.due_hours - max(proven, 0.0)) / hours + 2 * CLOSE))
        return Missing(max(0.0, row.due_hours - hours * had), plans, is_least=had >= most)
    if missed - proven > grain / 2:
        raise solving.cut_short()
    if isinstance(row, CeilingRow):
        over = hours * floor((row.allowed_hours + missed) / hours + 0.5) - row.allowed_hours
        return Missing(0.0 if missed <= 2 * CLOSE * grain else max(0.0, over), plans)
    return Missing(max(0, ceil(missed / grain - 1.5 * CLOSE)) * grain, plans)


def _most_intervals(row: HoursRow, missed_hours: float, hours: float) -> int:
    """Give how many intervals count when so many hours are missing, but for what flowing power adds or takes."""
    due = whole_intervals(row.due_hours, hours)
    if missed_hours <= 2 * CLOSE * hours:
        return due
    return max(0, min(due, floor((row.due_hours - missed_hours) / hours + 0.5)))


def grain_of(row: CommitmentRow, hours: float) -> float:
    """Give the step in which a row's figures are told: an interval, or 0.01 MWh."""
    return hours if isinstance(row, HoursRow | CeilingRow) else GRAIN_MWH


def amount_asked(commitment: Commitment, row: CommitmentRow, hours: float) -> float:
    """Give what a commitment asks in a row, in its unit, with what was counted before."""
    if isinstance(commitment, HoursAtLeast | HoursAtMost):
        return commitment.hours
    if isinstance(commitment, EnergyAtLeast | EnergyAtMost):
        return commitment.energy_mwh
    assert isinstance(row, FirmRow | HoldingRow)
    excused = row.excused if isinstance(row, FirmRow) else frozenset()
    return hours * float(sum(row.due_mw[t] for t in row.intervals if t not in excused))


def is_ceiling(row: CommitmentRow) -> bool:
    """Tell whether a row asks for no more than so much."""
    return isinstance(row, CeilingRow) or (isinstance(row, EnergyRow) and not row.at_least)


def unit_of(row: CommitmentRow) -> str:
    """Give the unit in which a row is told."""
    if isinstance(row, HoursRow | CeilingRow):
        return "h"
    return "MW h" if isinstance(row, HoldingRow) else "MWh"
