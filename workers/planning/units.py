"""What plants of every kind have in common, as meters, commitments and rules see them."""

from dataclasses import dataclass
from typing import Protocol
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import NDArray

from schemas.calendar import Calendar
from schemas.job import OneWindow, Outage

Floats = NDArray[np.float64]
Booleans = NDArray[np.bool_]

IDLE_MW = 1e-6
"""Up to this power counts as idle (contract, section 1)."""


@dataclass(frozen=True)
class OutOfService:
    """An outage as the request lists it: its place there, in words, and the intervals it touches."""

    pointer: str
    text: str
    intervals: range


class Unit(Protocol):
    """A plant in arrays of T values: what it can bring to its meter and take from it, MW, both at least 0."""

    @property
    def id(self) -> str:
        """Id of the asset."""

    @property
    def most_out_mw(self) -> Floats:
        """Most power into the grid, MW per interval."""

    @property
    def most_in_mw(self) -> Floats:
        """Most power out of the grid, MW per interval; a positive number."""

    @property
    def rated_discharge_mw(self) -> float:
        """Rated power of discharging or generating; 0 where there is none."""

    @property
    def rated_charge_mw(self) -> float:
        """Rated power of charging; 0 where there is none."""

    @property
    def standby_load_mw(self) -> float:
        """What the unit draws at its meter whatever it does, MW."""

    @property
    def outages(self) -> tuple[OutOfService, ...]:
        """Outages of the asset, as the request lists them."""

    @property
    def products(self) -> tuple[int, ...]:
        """Reserve products that the unit may hold, by their number in the window."""


def outages_of(job: OneWindow, asset: str, calendar: Calendar) -> tuple[OutOfService, ...]:
    """List the outages of an asset."""
    return tuple(
        OutOfService(f"/outages/{number}", _text(outage, calendar), calendar.touching(outage.from_, outage.to))
        for number, outage in enumerate(job.outages)
        if outage.asset == asset
    )


def _text(outage: Outage, calendar: Calendar) -> str:
    zone = ZoneInfo(calendar.timezone)
    until = "further notice" if outage.to is None else f"{outage.to.astimezone(zone):%Y-%m-%d %H:%M}"
    return f"{outage.kind} outage of {outage.asset} from {outage.from_.astimezone(zone):%Y-%m-%d %H:%M} until {until}"


def products_of(job: OneWindow, allowed: list[str] | None) -> tuple[int, ...]:
    """List the window's reserve products that an asset may hold: all where it names none."""
    if job.window is None:
        return ()
    return tuple(
        number for number, product in enumerate(job.window.reserve_products) if allowed is None or product.id in allowed
    )


def series(value: float | list[float], count: int) -> Floats:
    """Spread a series of the contract over all intervals."""
    return np.full(count, value, dtype=float) if isinstance(value, int | float) else np.asarray(value, dtype=float)
