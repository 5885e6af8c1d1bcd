"""Lay out the rows of a commitment: one target (an asset, or a sum of some) and, with `each_day`, one local day.

What was counted before is credited to the first row of each target.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import date

from schemas.commitments import FirmDelivery, HoursAtLeast, HoursAtMost, Promise
from schemas.fleet import Asset, Generator, Storage
from workers.planning.audit.case import Case
from workers.planning.audit.meters import net_power
from workers.planning.audit.reserve import Held


@dataclass(frozen=True)
class Readings:
    """What commitments are measured on, per interval in MW.

    Net powers of each asset at its terminals, of each site and of the fleet; reserve by asset and product.
    """

    assets: Mapping[str, Asset]
    power_mw: Mapping[str, Sequence[float]]
    site_mw: Mapping[str, Sequence[float]]
    fleet_mw: Sequence[float]
    held: Mapping[str, Held]


@dataclass(frozen=True)
class Target:
    """What a commitment is measured on: net power in MW, and the assets behind it.

    `asset` is set where it stands for itself, at its terminals.
    """

    asset: str | None
    name: str
    power_mw: Sequence[float]
    members: Sequence[Asset]

    def power_towards(self, direction: str) -> Sequence[float]:
        """Return its power counted in a direction: charging is negative power."""
        return self.power_mw if direction == "discharge" else [-mw for mw in self.power_mw]

    def rated_mw(self, direction: str) -> float:
        """Return the rated power of the assets that have one; outages do not change it."""
        rated = 0.0
        for asset in self.members:
            if isinstance(asset, Storage):
                rated += asset.charge_limit_mw if direction == "charge" else asset.discharge_limit_mw
            elif isinstance(asset, Generator) and direction == "discharge":
                rated += asset.max_output_mw
        return rated


@dataclass(frozen=True)
class Row:
    """The intervals that count, and the local day with `each_day`."""

    day: date | None
    intervals: Sequence[int]

    @property
    def day_text(self) -> str | None:
        """Write the day as the answer does."""
        return None if self.day is None else self.day.isoformat()

    @property
    def when(self) -> str:
        """Write the day as a part of a sentence."""
        return "" if self.day is None else f" on {self.day}"


def rows_of(case: Case, commitment: Promise) -> list[Row]:
    """List the rows of a commitment in order of time; a day or a stretch without an interval is none."""
    clock = case.clock
    inside = clock.starting_within(commitment.from_, commitment.to)
    if not commitment.each_day:
        return [Row(None, inside)]
    days = clock.days if commitment.between is None else clock.between(commitment.between[0], commitment.between[1])
    rows = [Row(day, [t for t in members if t in inside]) for day, members in days.items()]
    return [row for row in rows if row.intervals]


def targets_of(case: Case, commitment: Promise, readings: Readings) -> Iterator[Target]:
    """Yield what a commitment is measured on; raise ValueError where the fleet has no such asset or site."""
    over = commitment.applies_to
    unknown = [name for name in (*(over.assets or ()), *(over.group or ())) if name not in readings.assets]
    if over.site is not None and over.site not in readings.site_mw:
        unknown.append(over.site)
    if unknown:
        raise ValueError(f"commitment {commitment.id} names {unknown[0]}, which the fleet does not have")
    if over.assets is not None:
        for name in over.assets:
            yield Target(name, name, readings.power_mw[name], [readings.assets[name]])
    elif over.group is not None:
        members = [readings.assets[name] for name in over.group]
        yield Target(None, "the group", net_power(members, readings.power_mw, case.clock.count), members)
    elif over.site is not None:
        members = [asset for asset in case.fleet.assets if asset.site == over.site]
        yield Target(None, over.site, readings.site_mw[over.site], members)
    elif over.fleet:
        yield Target(None, "the fleet", readings.fleet_mw, case.fleet.assets)
    else:
        raise ValueError(f"commitment {commitment.id} applies to nothing")


def excused_intervals(case: Case, commitment: HoursAtLeast | HoursAtMost | FirmDelivery) -> set[int]:
    """Return the intervals that are excused."""
    return {t for stretch in commitment.excused for t in case.clock.starting_within(stretch.from_, stretch.to)}


def credits_of(case: Case, commitment: Promise, target: Target, rows: Sequence[Row]) -> Iterator[tuple[Row, float]]:
    """Yield each row with what was counted before, which the first one gets.

    Raises ValueError where it is given by asset for a commitment on a sum.
    """
    credit = case.job.counted_before.commitments.get(commitment.id, 0.0)
    if not isinstance(credit, int | float):
        if target.asset is None:
            raise ValueError(f"commitment {commitment.id} is over a sum: what was counted before is one number for it")
        credit = credit.get(target.asset, 0.0)
    for row in rows:
        yield row, credit
        credit = 0.0
