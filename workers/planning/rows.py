"""The rows of commitments: one target each, over one asset or the sum of several, for one day or the whole window."""

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from schemas.calendar import Calendar, rows_of
from schemas.commitments import (
    Commitment,
    EnergyAtLeast,
    EnergyAtMost,
    FirmDelivery,
    HoursAtLeast,
    HoursAtMost,
    ReserveHolding,
)
from schemas.fleet import Fleet
from schemas.job import OneWindow
from workers.planning.units import Floats, Unit, series


@dataclass(frozen=True)
class CommitmentRow:
    """What every row has.

    Its power is that of `units` less `load_mw` (T values; what loads draw there), times `sign` (+1 discharge, -1
    charge). `intervals` are those that count, `excused` the ones among them in which nothing is asked. `price` is what
    a unit of shortfall (or excess) costs; None binds.
    """

    commitment: int
    id: str
    asset: str | None
    day: str | None
    units: tuple[int, ...]
    load_mw: Floats
    sign: float
    intervals: tuple[int, ...]
    excused: frozenset[int]
    price: float | None

    @property
    def pointer(self) -> str:
        """Where the commitment stands in the request."""
        return f"/commitments/{self.commitment}"

    @property
    def where(self) -> str:
        """Whose row it is, and of which day, in words."""
        return (f" of {self.asset}" if self.asset else "") + (f" on {self.day}" if self.day else "")


@dataclass(frozen=True)
class HoursRow(CommitmentRow):
    """At least so many hours at or above the threshold (headroom included), less what was credited."""

    threshold_mw: float
    due_hours: float
    min_block: int

    @property
    def discharging(self) -> int | None:
        """Number of the one unit that it binds to discharge; None where it has a price, or asks for anything else."""
        is_of_one = self.asset is not None and len(self.units) == 1
        return self.units[0] if is_of_one and self.price is None and self.sign > 0 else None


@dataclass(frozen=True)
class CeilingRow(CommitmentRow):
    """At most so many hours above the threshold (headroom taken off), less what was counted."""

    threshold_mw: float
    allowed_hours: float


@dataclass(frozen=True)
class FirmRow(CommitmentRow):
    """At least so much power in each interval, T values; nothing is due where it is 0."""

    due_mw: Floats


@dataclass(frozen=True)
class EnergyRow(CommitmentRow):
    """At least (or at most) so much energy in the row's direction, less what was credited."""

    energy_mwh: float
    at_least: bool


@dataclass(frozen=True)
class HoldingRow(CommitmentRow):
    """At least so much reserve of a product in each interval, T values."""

    product: int
    due_mw: Floats


def most_power(units: Sequence[Unit], row: CommitmentRow) -> Floats:
    """Give the most power in the row's direction that limits allow, MW per interval; below 0 where loads outweigh."""
    most: Floats = -row.sign * row.load_mw
    for number in row.units:
        most = most + (units[number].most_out_mw if row.sign > 0 else units[number].most_in_mw)
    return most


def most_against(units: Sequence[Unit], row: CommitmentRow) -> Floats:
    """Give the most power against the row's direction that limits allow, MW per interval; below 0 where none can be."""
    most: Floats = row.sign * row.load_mw
    for number in row.units:
        most = most + (units[number].most_in_mw if row.sign > 0 else units[number].most_out_mw)
    return most


@dataclass(frozen=True)
class Ground:
    """What rows are built on: units and loads by asset id, and the calendar."""

    job: OneWindow
    fleet: Fleet
    calendar: Calendar
    units: tuple[Unit, ...]
    numbers: dict[str, int]
    drawn: Callable[[Iterable[str]], Floats]
    loads: dict[str, Floats]


def rows_of_job(ground: Ground) -> Iterator[CommitmentRow]:
    """List every row of every commitment, in the order of the request."""
    everything = [asset.id for asset in ground.fleet.assets]
    at_site: dict[str, list[str]] = {}
    for asset in ground.fleet.assets:
        if asset.site is not None:
            at_site.setdefault(asset.site, []).append(asset.id)
    for number, commitment in enumerate(ground.job.commitments):
        stretches = rows_of(commitment, ground.calendar)
        excused = _excused(commitment, ground.calendar)
        for whose, members in _bound(commitment, everything, at_site):
            units = tuple(ground.numbers[member] for member in members if member in ground.numbers)
            idle = np.zeros(ground.calendar.count)
            load = ground.drawn(members) if whose is None else ground.loads.get(whose, idle)
            for order, stretch in enumerate(stretches):
                common = {
                    "commitment": number,
                    "id": commitment.id,
                    "asset": whose,
                    "day": stretch.day.isoformat() if stretch.day else None,
                    "units": units,
                    "load_mw": load,
                    "sign": -1.0 if getattr(commitment, "direction", "discharge") == "charge" else 1.0,
                    "intervals": stretch.intervals,
                    "excused": excused.intersection(stretch.intervals),
                }
                credit = _credit(ground.job, commitment.id, whose) if order == 0 else 0.0
                yield _row(ground, commitment, common, credit)


def _bound(
    commitment: Commitment, everything: list[str], at_site: dict[str, list[str]]
) -> list[tuple[str | None, list[str]]]:
    """Say whom a commitment binds: each asset on its own, or the sum of several."""
    whom = commitment.applies_to
    if whom.assets is not None:
        return [(asset, [asset]) for asset in whom.assets]
    if whom.group is not None:
        return [(None, list(whom.group))]
    return [(None, at_site.get(whom.site, []) if whom.site is not None else everything)]


def _excused(commitment: Commitment, calendar: Calendar) -> frozenset[int]:
    stretches = getattr(commitment, "excused", [])
    return frozenset(k for stretch in stretches for k in calendar.starting_within(stretch.from_, stretch.to))


def _row(ground: Ground, commitment: Commitment, common: dict[str, Any], credit: float) -> CommitmentRow:
    count = ground.calendar.count
    members = [ground.units[number] for number in common["units"]]
    if isinstance(commitment, HoursAtLeast):
        return HoursRow(
            **common,
            price=commitment.shortfall_price_per_hour,
            threshold_mw=_threshold(commitment, members) + commitment.headroom_mw,
            due_hours=commitment.hours - credit,
            min_block=max(1, round(commitment.min_block_hours / ground.calendar.hours)),
        )
    if isinstance(commitment, HoursAtMost):
        return CeilingRow(
            **common,
            price=commitment.shortfall_price_per_hour,
            threshold_mw=max(0.0, _threshold(commitment, members) - commitment.headroom_mw),
            allowed_hours=commitment.hours - credit,
        )
    if isinstance(commitment, FirmDelivery):
        return FirmRow(**common, price=commitment.shortfall_price_per_mwh, due_mw=series(commitment.power_mw, count))
    if isinstance(commitment, EnergyAtLeast | EnergyAtMost):
        return EnergyRow(
            **common,
            price=commitment.shortfall_price_per_mwh,
            energy_mwh=commitment.energy_mwh - credit,
            at_least=isinstance(commitment, EnergyAtLeast),
        )
    assert isinstance(commitment, ReserveHolding)
    window = ground.job.window
    names = [product.id for product in window.reserve_products] if window is not None else []
    return HoldingRow(
        **common,
        price=commitment.shortfall_price_per_mw_per_hour,
        product=names.index(commitment.product),
        due_mw=series(commitment.power_mw, count),
    )


def _threshold(commitment: HoursAtLeast | HoursAtMost, units: list[Unit]) -> float:
    if commitment.threshold.mw is not None:
        return commitment.threshold.mw
    charging = commitment.direction == "charge"
    rated = sum(unit.rated_charge_mw if charging else unit.rated_discharge_mw for unit in units)
    return (commitment.threshold.fraction_of_rated or 0.0) * rated


def _credit(job: OneWindow, commitment: str, asset: str | None) -> float:
    counted = job.counted_before.commitments.get(commitment, 0.0)
    if isinstance(counted, dict):
        return counted.get(asset, 0.0) if asset is not None else 0.0
    return counted
