"""What outages leave of an asset, interval by interval.

Outages are widened outwards to interval borders; where several overlap, the smallest fraction holds.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from schemas.calendar import Calendar
from schemas.job import OneWindow, Outage


@dataclass(frozen=True)
class Availability:
    """Fractions of the limits that are left, T values each, between 0 and 1."""

    charge: NDArray[np.float64]
    discharge: NDArray[np.float64]

    @property
    def is_lowered(self) -> NDArray[np.bool_]:
        """Intervals in which an outage lowers what the asset can do: no ramp binds into them."""
        lowered: NDArray[np.bool_] = (self.charge < 1) | (self.discharge < 1)
        return lowered


def fractions(outage: Outage) -> tuple[float, float]:
    """Read an outage's fractions for charging and discharging; nothing given means nothing is left."""
    given = outage.available_fraction
    one_way = outage.available_charge_fraction is not None or outage.available_discharge_fraction is not None
    rest = given if given is not None else (1.0 if one_way else 0.0)
    charge = rest if outage.available_charge_fraction is None else outage.available_charge_fraction
    discharge = rest if outage.available_discharge_fraction is None else outage.available_discharge_fraction
    return charge, discharge


def availability_of(job: OneWindow, calendar: Calendar) -> dict[str, Availability]:
    """Collect what is left of each asset that has an outage; the others are absent."""
    left: dict[str, Availability] = {}
    for outage in job.outages:
        entry = left.setdefault(outage.asset, Availability(np.ones(calendar.count), np.ones(calendar.count)))
        hit = calendar.touching(outage.from_, outage.to)
        charge, discharge = fractions(outage)
        where = slice(hit.start, hit.stop)
        np.minimum(entry.charge[where], charge, out=entry.charge[where])
        np.minimum(entry.discharge[where], discharge, out=entry.discharge[where])
    return left
