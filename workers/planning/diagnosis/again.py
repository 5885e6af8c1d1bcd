"""Plan a changed request again, and reuse what was found for the parts that a change leaves alone."""

from collections.abc import Callable
from dataclasses import fields, is_dataclass
from typing import Any

import numpy as np

from schemas.job import ScheduleJob
from schemas.schedule import Schedule
from workers.planning.assembly import UnitPlan
from workers.planning.diagnosis.feasibility import Solving
from workers.planning.earlier import Earlier, plans_for
from workers.planning.instance import Instance, instance_of
from workers.planning.joint import Solution
from workers.planning.methods import Choice, Found
from workers.planning.parts import independent_parts
from workers.planning.proof import PlanningError

SHARE = 0.05
LEAST_SECONDS = 1.0
"""A part may take this share of the time left, or so many seconds; what it has found by then is planned."""

Audited = Callable[[ScheduleJob, Found], Schedule]


class Planner:
    """Plans part by part; a part that is the same in every figure is not solved twice."""

    def __init__(self, audited: Audited) -> None:
        self.refused = 0
        self._audited = audited
        self._known: dict[tuple[str, ...], tuple[Instance, Solution]] = {}

    def plan(self, job: ScheduleJob, solving: Solving, earlier: Earlier) -> Schedule | None:
        """Plan a job; None where it cannot be met, or where the audit refuses what was found: that is counted.

        The search begins from what units did `earlier`, where that is known. Raises CutShort where time decides
        nothing.
        """
        parts = tuple(independent_parts(instance_of(job)))
        solutions = []
        for part in parts:
            solution = self.solution(part, solving, plans_for(part, earlier))
            if solution.plans is None:
                if solution.bound == -np.inf:
                    return None
                raise solving.cut_short()
            solutions.append(solution)
        try:
            return self._audited(job, Found(choice_of(parts), tuple(solutions)))
        except PlanningError:
            self.refused += 1
            return None

    def solution(self, part: Instance, solving: Solving, earlier: tuple[UnitPlan, ...] | None = None) -> Solution:
        """Solve a part, or remember what was found for the same one; begins from `earlier` plans. Raises CutShort."""
        known = self._known.get(key_of(part))
        if known is not None and is_same(known[0], part):
            return known[1]
        solution = solving.solve(part, max(LEAST_SECONDS, SHARE * solving.seconds_left), earlier, is_plan=True)
        if solution.plans is not None:
            self._known[key_of(part)] = (part, solution)
        return solution


def key_of(part: Instance) -> tuple[str, ...]:
    """Name an independent part by its plants and meters."""
    return tuple(unit.id for unit in part.units) + tuple(meter.id for meter in part.meters)


def choice_of(parts: tuple[Instance, ...]) -> Choice:
    """Name the method by which parts are solved one by one."""
    alone = all(len(part.units) <= 1 for part in parts)
    return Choice("per_asset" if alone else "milp", parts, "part by part, for a diagnosis")


def is_same(one: Any, other: Any) -> bool:
    """Tell whether two instances, or parts of them, are equal in every figure."""
    if isinstance(one, np.ndarray):
        return isinstance(other, np.ndarray) and np.array_equal(one, other)
    if isinstance(one, tuple):
        return (
            isinstance(other, tuple)
            and len(one) == len(other)
            and all(is_same(left, right) for left, right in zip(one, other, strict=True))
        )
    if is_dataclass(one) and not isinstance(one, type):
        return type(one) is type(other) and all(
            is_same(getattr(one, each.name), getattr(other, each.name)) for each in fields(one)
        )
    return bool(one == other)
