"""The lever of a connection: a higher limit today, where a job allows to ask for that."""

from collections.abc import Iterator

import numpy as np

from schemas.job import ScheduleJob, TodaysLimits
from workers.planning.diagnosis.elements import SIDES, Element
from workers.planning.diagnosis.levers.lever import Grid, Lever, Values
from workers.planning.diagnosis.levers.powers import most_power
from workers.planning.diagnosis.scope import Scope


def of_limit(scope: Scope, element: Element) -> Iterator[Lever]:
    """Give the lever of a limit: at least so many MW in every interval, as today's limit."""
    meter, side, instance = element.subject, element.name, scope.instance
    known = instance.fleet if meter == "fleet" else next(m for m in instance.meters if m.id == meter)
    limit = getattr(known, side)
    grid = Grid(float(np.min(limit)), max(float(np.min(limit)), most_power(instance)))
    pointer = f"/limits/{meter}/{side}"

    def at(step: int) -> float | list[float]:
        if (limit == grid.now).all():
            return grid.at(step)
        return [float(value) for value in np.maximum(limit, grid.at(step))]

    def apply(job: ScheduleJob, step: int) -> ScheduleJob:
        return with_limit(job, meter, side, at(step))

    def values(step: int) -> Values:
        return {pointer: at(step)}

    def words(step: int) -> str:
        changed = f"{meter}: {SIDES[side]} of {grid.at(step):g} MW instead of {grid.now:g}"
        return f"{changed}; the limit of a connection is for its network operator to raise"

    yield Lever("limits", pointer, "MW", grid.steps, frozenset({element}), apply, values, grid.at, words)


def with_limit(job: ScheduleJob, meter: str, side: str, limit_mw: float | list[float]) -> ScheduleJob:
    """Give a job with another of today's limits."""
    todays = job.limits.get(meter, TodaysLimits()).model_copy(update={side: limit_mw})
    return job.model_copy(update={"limits": {**job.limits, meter: todays}})
