"""Renewables and flexible loads as the models see them."""

from dataclasses import dataclass

import numpy as np

from schemas.calendar import Calendar
from schemas.fleet import FlexibleLoad, Renewable
from schemas.job import OneWindow
from workers.planning.availability import Availability
from workers.planning.units import IDLE_MW, Booleans, Floats, OutOfService, outages_of, series


@dataclass(frozen=True)
class RenewableUnit:
    """Wind or sun: up to `available_mw` (T values), or exactly that when it cannot be curtailed."""

    id: str
    available_mw: Floats
    curtailable: bool
    cost_per_mwh: float
    outages: tuple[OutOfService, ...]
    products: tuple[int, ...] = ()
    standby_load_mw: float = 0.0
    rated_discharge_mw: float = 0.0
    rated_charge_mw: float = 0.0

    @property
    def most_out_mw(self) -> Floats:
        """Most output, MW per interval."""
        return self.available_mw

    @property
    def most_in_mw(self) -> Floats:
        """What cannot be curtailed still flows out: nothing is taken from the grid."""
        return np.zeros_like(self.available_mw)


@dataclass(frozen=True)
class Need:
    """Energy to be drawn in some intervals, MWh."""

    intervals: range
    energy_mwh: float


@dataclass(frozen=True)
class FlexibleLoadUnit:
    """A load that draws each need's energy within it, at most `limit_mw` (T values), nothing outside."""

    id: str
    limit_mw: Floats
    min_draw_mw: float
    interruptible: bool
    needs: tuple[Need, ...]
    outages: tuple[OutOfService, ...]
    products: tuple[int, ...] = ()
    standby_load_mw: float = 0.0
    rated_discharge_mw: float = 0.0
    rated_charge_mw: float = 0.0

    @property
    def can_draw(self) -> Booleans:
        """Intervals of a need in which at least the minimum draw is left."""
        within = np.zeros(len(self.limit_mw), dtype=bool)
        for need in self.needs:
            within[need.intervals.start : need.intervals.stop] = True
        possible: Booleans = within & (self.limit_mw > IDLE_MW) & (self.limit_mw >= self.min_draw_mw - 1e-9)
        return possible

    @property
    def most_out_mw(self) -> Floats:
        """A load brings nothing to the grid."""
        return np.zeros_like(self.limit_mw)

    @property
    def most_in_mw(self) -> Floats:
        """Most that can be drawn, MW per interval."""
        return self.limit_mw * self.can_draw


def renewable_of(job: OneWindow, asset: Renewable, calendar: Calendar, available: Availability | None) -> RenewableUnit:
    """Index one renewable; `available` is what its outages leave, None where it has none."""
    forecast = series(job.forecasts[asset.id], calendar.count)
    return RenewableUnit(
        id=asset.id,
        available_mw=forecast if available is None else forecast * available.discharge,
        curtailable=asset.curtailable,
        cost_per_mwh=asset.cost_per_mwh,
        outages=outages_of(job, asset.id, calendar) if available is not None else (),
    )


def flexible_load_of(
    job: OneWindow, asset: FlexibleLoad, calendar: Calendar, available: Availability | None
) -> FlexibleLoadUnit:
    """Index one flexible load; `available` is what its outages leave, None where it has none."""
    limit = np.full(calendar.count, asset.draw_limit_mw, dtype=float)
    needs = job.energy_needs.get(asset.id, [])
    return FlexibleLoadUnit(
        id=asset.id,
        limit_mw=limit if available is None else limit * available.charge,
        min_draw_mw=asset.min_draw_mw,
        interruptible=asset.interruptible,
        needs=tuple(Need(calendar.starting_within(need.from_, need.to), need.energy_mwh) for need in needs),
        outages=outages_of(job, asset.id, calendar) if available is not None else (),
    )
