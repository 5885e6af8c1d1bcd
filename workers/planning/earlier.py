"""An earlier schedule as a start: what was decided then narrows a model until little is left to decide.

Nothing here proves anything. A narrowed model that has a solution gives a schedule of the request; one that has none
says only that the earlier schedule does not fit the request any more.
"""

from collections.abc import Iterable, Mapping
from dataclasses import replace

import numpy as np

from schemas.schedule import AssetSchedule
from workers.planning.assembly import Assembled, UnitPlan
from workers.planning.instance import Instance
from workers.planning.model import Columns
from workers.planning.rules.columns import FlexibleLoadColumns, GeneratorColumns, StoreColumns
from workers.planning.units import IDLE_MW, Booleans, Floats

REACH_MW = IDLE_MW
"""An earlier set point was rounded, and may have met a limit within the audit's tolerance."""

Earlier = Mapping[str, UnitPlan]
"""What each unit did, by its id."""


def earlier_of(instance: Instance, assets: Iterable[AssetSchedule]) -> Earlier:
    """Read what the assets of an earlier schedule did; products that the instance does not have are left out."""
    numbers = {product.id: number for number, product in enumerate(instance.products)}
    return {
        asset.id: UnitPlan(
            power_mw=np.array(asset.power_mw, dtype=float),
            is_on=None if asset.on is None else np.array(asset.on, dtype=bool),
            reserve_mw={
                numbers[name]: np.array(held, dtype=float) for name, held in asset.reserve_mw.items() if name in numbers
            },
        )
        for asset in assets
    }


def plans_by_unit(instance: Instance, plans: tuple[UnitPlan, ...]) -> Earlier:
    """Name what an instance's units do by their ids."""
    return {unit.id: plan for unit, plan in zip(instance.units, plans, strict=True)}


def plans_for(instance: Instance, earlier: Earlier | None) -> tuple[UnitPlan, ...] | None:
    """Take the earlier plans of an instance's units in its order; None unless there is one for each, of its length."""
    if earlier is None or not instance.units:
        return None
    plans = tuple(earlier[unit.id] for unit in instance.units if unit.id in earlier)
    return plans if is_of_shape(instance, plans) else None


def is_of_shape(instance: Instance, plans: tuple[UnitPlan, ...]) -> bool:
    """Tell whether there is a plan for each unit, with a finite power for each interval."""
    shape = (instance.intervals,)
    return len(plans) == len(instance.units) and all(
        plan.power_mw.shape == shape
        and np.isfinite(plan.power_mw).all()
        and (plan.is_on is None or plan.is_on.shape == shape)
        for plan in plans
    )


def as_it_was(assembled: Assembled, earlier: tuple[UnitPlan, ...]) -> Assembled:
    """Keep every power where it was, and every generator on or off: what counts towards commitments is left to find."""
    bounds = _Bounds(assembled)
    for unit, plan in zip(assembled.columns.units, earlier, strict=True):
        power = np.where(np.abs(plan.power_mw) > IDLE_MW, plan.power_mw, 0.0)
        for part, sign in unit.net:
            along = np.maximum(sign * power, 0.0)
            bounds.narrow(part, along - REACH_MW, np.where(sign * power >= 0, along + REACH_MW, 0.0))
        if isinstance(unit, StoreColumns):
            bounds.close(np.concatenate([unit.charge[power == 0], unit.discharge[power == 0]]))
        elif isinstance(unit, GeneratorColumns):
            bounds.fix(unit.is_on, _was_on(plan))
    return bounds.applied()


def with_its_choices(assembled: Assembled, earlier: tuple[UnitPlan, ...]) -> Assembled:
    """Keep what was on or off and the direction of every store, and let powers and what counts be found anew."""
    bounds = _Bounds(assembled)
    modes = iter(assembled.modes)
    for unit, plan in zip(assembled.columns.units, earlier, strict=True):
        out, into = plan.power_mw > IDLE_MW, plan.power_mw < -IDLE_MW
        if isinstance(unit, GeneratorColumns):
            bounds.fix(unit.is_on, _was_on(plan))
        elif isinstance(unit, FlexibleLoadColumns) and unit.drawing is not None:
            bounds.fix(unit.drawing, into)
        elif isinstance(unit, StoreColumns):
            own = next(modes)
            bounds.close(np.concatenate([unit.charge[out], unit.discharge[into]]))
            if unit.states is not None:
                bounds.fix(unit.states.discharging, out)
                bounds.fix(unit.states.charging, into)
            acts = (out | into)[own.intervals]
            bounds.fix(own.columns[acts], out[own.intervals][acts])
    return bounds.applied()


def _was_on(plan: UnitPlan) -> Booleans:
    running: Booleans = plan.power_mw > IDLE_MW
    return running if plan.is_on is None else plan.is_on


class _Bounds:
    """The bounds of a model's columns while they are narrowed; what is fixed is no integer any more."""

    def __init__(self, assembled: Assembled) -> None:
        self._assembled = assembled
        self._lower, self._upper = assembled.matrix.lower.copy(), assembled.matrix.upper.copy()

    def narrow(self, columns: Columns, lower: Floats, upper: Floats) -> None:
        self._lower[columns] = np.maximum(self._lower[columns], lower)
        self._upper[columns] = np.minimum(self._upper[columns], upper)

    def close(self, columns: Columns) -> None:
        self._upper[columns] = np.minimum(self._upper[columns], 0.0)

    def fix(self, columns: Columns, at: Booleans) -> None:
        self.narrow(columns, at.astype(float), at.astype(float))

    def applied(self) -> Assembled:
        matrix = replace(self._assembled.matrix, lower=self._lower, upper=self._upper)
        return replace(self._assembled, matrix=matrix)
