"""A generator as the models see it: limits per interval, its cost curve, its state at the start."""

from dataclasses import dataclass
from math import floor, inf

import numpy as np

from schemas.calendar import Calendar
from schemas.fleet import Generator
from schemas.job import OneWindow
from workers.planning.availability import Availability
from workers.planning.store import whole_intervals
from workers.planning.units import IDLE_MW, Booleans, Floats, OutOfService, outages_of, products_of


@dataclass(frozen=True)
class GeneratorUnit:
    """A generator in arrays of T values, MW.

    `ramp_up_mw`, `ramp_down_mw`: largest change per interval (None: unlimited), binding into `ramp_binds`.
    `start_costs`: pairs of hours off and cost, ascending from 0. `held_intervals`: how many of the first intervals the
    state before the window must still last; `hours_off` at the window's start, infinite when long, 0 when on.
    """

    id: str
    min_output_mw: float
    limit_mw: Floats
    rated_mw: float
    constant_per_hour: float
    linear_per_mwh: float
    quadratic_per_mw2h: float
    start_costs: tuple[tuple[float, float], ...]
    min_up: int
    min_down: int
    ramp_up_mw: float | None
    ramp_down_mw: float | None
    ramp_binds: Booleans
    was_on: bool
    output_before_mw: float
    hours_off: float
    held_intervals: int
    outages: tuple[OutOfService, ...]
    products: tuple[int, ...]
    standby_load_mw: float = 0.0
    rated_charge_mw: float = 0.0

    @property
    def can_run(self) -> Booleans:
        """Intervals in which at least the minimum output is left."""
        possible: Booleans = self.limit_mw >= max(self.min_output_mw, IDLE_MW) - 1e-9
        return possible

    @property
    def most_out_mw(self) -> Floats:
        """Most output, MW per interval."""
        return self.limit_mw * self.can_run

    @property
    def most_in_mw(self) -> Floats:
        """A generator takes nothing from the grid."""
        return np.zeros_like(self.limit_mw)

    @property
    def rated_discharge_mw(self) -> float:
        """Rated power: the maximum output, outages aside."""
        return self.rated_mw


def generator_of(job: OneWindow, asset: Generator, calendar: Calendar, available: Availability | None) -> GeneratorUnit:
    """Index one generator; `available` is what its outages leave, None where it has none."""
    count, hours = calendar.count, calendar.hours
    state = job.initial.get(asset.id)
    was_on = bool(state and state.on)
    elapsed = state.hours_in_state if state is not None and state.hours_in_state is not None else inf
    min_up, min_down = whole_intervals(asset.min_up_hours, hours), whole_intervals(asset.min_down_hours, hours)
    needed = min_up if was_on else min_down
    before = state.output_mw if state is not None and state.output_mw is not None else asset.min_output_mw
    limit = np.full(count, asset.max_output_mw, dtype=float)
    return GeneratorUnit(
        id=asset.id,
        min_output_mw=asset.min_output_mw,
        limit_mw=limit if available is None else limit * available.discharge,
        rated_mw=asset.max_output_mw,
        constant_per_hour=asset.cost.constant_per_hour,
        linear_per_mwh=asset.cost.linear_per_mwh,
        quadratic_per_mw2h=asset.cost.quadratic_per_mw2h,
        start_costs=tuple((entry.after_hours_off, entry.cost) for entry in asset.start_costs),
        min_up=max(1, min_up),
        min_down=max(1, min_down),
        ramp_up_mw=None if asset.ramp_up_mw_per_hour is None else asset.ramp_up_mw_per_hour * hours,
        ramp_down_mw=None if asset.ramp_down_mw_per_hour is None else asset.ramp_down_mw_per_hour * hours,
        ramp_binds=np.ones(count, dtype=bool) if available is None else ~available.is_lowered,
        was_on=was_on,
        output_before_mw=before if was_on else 0.0,
        hours_off=0.0 if was_on else elapsed,
        held_intervals=0 if elapsed == inf else max(0, needed - floor(elapsed / hours + 1e-9)),
        outages=outages_of(job, asset.id, calendar) if available is not None else (),
        products=products_of(job, asset.reserve_products),
    )
