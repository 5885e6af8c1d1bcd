"""Levers of commitments: fewer hours, a lower threshold, less energy or power; more of what is a ceiling."""

from collections.abc import Iterator
from typing import Any

import numpy as np

from schemas.commitments import (
    Commitment,
    EnergyAtLeast,
    EnergyAtMost,
    FirmDelivery,
    HoursAtLeast,
    HoursAtMost,
    ReserveHolding,
)
from schemas.job import ScheduleJob
from workers.planning.diagnosis.levers.lever import GRAIN, Grid, Lever, Values
from workers.planning.diagnosis.levers.powers import most_power
from workers.planning.diagnosis.scope import Scope

OF_RATED = "of rated power"


def of_commitment(scope: Scope, number: int) -> Iterator[Lever]:
    """Give the levers of a commitment, by its number in the request; all its rows move together."""
    commitment = scope.job.commitments[scope.commitments.index(number)]
    hours, most = scope.instance.hours, most_power(scope.instance)
    window = scope.instance.intervals * hours
    if isinstance(commitment, HoursAtLeast):
        yield _lever(scope, number, "hours", "h", Grid(commitment.hours, 0.0, hours), "ask for")
        member, now, unit = _threshold(commitment)
        yield _lever(scope, number, member, unit, Grid(now, min(now, GRAIN)), "count from")
    elif isinstance(commitment, HoursAtMost):
        yield _lever(scope, number, "hours", "h", Grid(commitment.hours, max(commitment.hours, window), hours), "allow")
        member, now, unit = _threshold(commitment)
        end = 1.0 if unit == OF_RATED else max(now, most + commitment.headroom_mw)
        yield _lever(scope, number, member, unit, Grid(now, end), "count above")
    elif isinstance(commitment, EnergyAtLeast):
        yield _lever(scope, number, "energy_mwh", "MWh", Grid(commitment.energy_mwh, 0.0), "ask for")
    elif isinstance(commitment, EnergyAtMost):
        grid = Grid(commitment.energy_mwh, max(commitment.energy_mwh, most * window))
        yield _lever(scope, number, "energy_mwh", "MWh", grid, "allow")
    elif isinstance(commitment, FirmDelivery | ReserveHolding):
        grid = Grid(float(np.max(commitment.power_mw)), 0.0)
        yield _lever(scope, number, "power_mw", "MW", grid, "ask for at most")


def _lever(scope: Scope, number: int, member: str, unit: str, grid: Grid, what: str) -> Lever:
    """Give the lever of one member; of a series the part above is capped."""
    place = scope.commitments.index(number)
    commitment = scope.job.commitments[place]
    pointer = f"/commitments/{number}/{member}"
    series = commitment.power_mw if isinstance(commitment, FirmDelivery | ReserveHolding) else None

    def at(step: int) -> float | list[float]:
        most = grid.at(step)
        return [min(power, most) for power in series] if isinstance(series, list) else most

    def apply(job: ScheduleJob, step: int) -> ScheduleJob:
        commitments = list(job.commitments)
        commitments[place] = _with(commitments[place], member, at(step))
        return job.model_copy(update={"commitments": commitments})

    def values(step: int) -> Values:
        return {pointer: at(step)}

    def words(step: int) -> str:
        return f"{commitment.id}: {what} {grid.at(step):g} {unit} instead of {grid.now:g}"

    covers = frozenset(element for element in scope.elements if element.kind == "row" and element.number == number)
    return Lever("commitments", pointer, unit, grid.steps, covers, apply, values, grid.at, words)


def _with(commitment: Commitment, member: str, value: Any) -> Commitment:
    first, _, second = member.partition("/")
    if second:
        value = getattr(commitment, first).model_copy(update={second: value})
    return commitment.model_copy(update={first: value})


def _threshold(commitment: HoursAtLeast | HoursAtMost) -> tuple[str, float, str]:
    if commitment.threshold.mw is not None:
        return "threshold/mw", commitment.threshold.mw, "MW"
    return "threshold/fraction_of_rated", commitment.threshold.fraction_of_rated or 0.0, OF_RATED
