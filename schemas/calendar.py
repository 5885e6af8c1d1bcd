"""Intervals, local days and the rows a commitment stands for.

Used to check and to index a request. The audit has arithmetic of its own and never imports this module.
"""

from dataclasses import dataclass
from datetime import UTC, date, datetime, time, timedelta
from functools import cached_property
from itertools import groupby
from zoneinfo import ZoneInfo

from schemas.commitments import Promise
from schemas.window import Window


@dataclass(frozen=True)
class Calendar:
    """Equal intervals of absolute time, read in one time zone."""

    start: datetime
    interval: timedelta
    count: int
    timezone: str

    @classmethod
    def of(cls, window: Window) -> "Calendar":
        """Take the intervals of a window."""
        return cls(window.start.astimezone(UTC), window.interval, window.intervals, window.timezone)

    @property
    def hours(self) -> float:
        """Length of an interval in hours."""
        return self.interval.total_seconds() / 3600

    @property
    def end(self) -> datetime:
        """End of the last interval."""
        return self.start + self.count * self.interval

    @cached_property
    def local_starts(self) -> tuple[datetime, ...]:
        """Start of each interval, with the time zone's offset at that instant."""
        zone = ZoneInfo(self.timezone)
        return tuple((self.start + k * self.interval).astimezone(zone) for k in range(self.count))

    @cached_property
    def days(self) -> tuple[date, ...]:
        """Local day of each interval: the one in which it starts."""
        return tuple(start.date() for start in self.local_starts)

    @cached_property
    def day_ranges(self) -> tuple[tuple[date, range], ...]:
        """Each local day with its intervals, in order; a day may be cut by the window."""
        found = []
        for day, members in groupby(range(self.count), key=lambda k: self.days[k]):
            indices = list(members)
            found.append((day, range(indices[0], indices[-1] + 1)))
        return tuple(found)

    @cached_property
    def stretches(self) -> dict[tuple[time, time], list[tuple[date, list[int]]]]:
        """Daily stretches between two wall times, each with its intervals; filled as they are asked for."""
        return {}

    def is_border(self, instant: datetime) -> bool:
        """Tell whether an instant lies on an interval border, inside the window or beyond it."""
        return (instant - self.start) % self.interval == timedelta(0)

    def starting_within(self, begin: datetime | None, end: datetime | None) -> range:
        """Intervals that start at or after `begin` and before `end`; open where None."""
        first = 0 if begin is None else -((self.start - begin) // self.interval)
        last = self.count if end is None else -((self.start - end) // self.interval)
        first, last = max(0, first), min(self.count, last)
        return range(first, max(first, last))

    def touching(self, begin: datetime, end: datetime | None) -> range:
        """Intervals that overlap a stretch of time at all: it is widened outwards to interval borders."""
        first = (begin - self.start) // self.interval
        last = self.count if end is None else -((self.start - end) // self.interval)
        if end is not None and end <= begin:
            return range(0)
        first, last = max(0, first), min(self.count, last)
        return range(first, max(first, last))

    def cut_days(self) -> tuple[date, ...]:
        """Local days of which the window holds a part only."""
        zone = ZoneInfo(self.timezone)
        cut = []
        for day, members in self.day_ranges:
            midnight = datetime.combine(day, time(0), zone)
            next_midnight = datetime.combine(day + timedelta(days=1), time(0), zone)
            whole = self.touching(midnight, next_midnight)
            starts_late = members[0] == 0 and midnight < self.start
            ends_early = members[-1] == self.count - 1 and next_midnight > self.end
            if starts_late or ends_early or len(whole) == 0:
                cut.append(day)
        return tuple(cut)


@dataclass(frozen=True)
class Row:
    """One target of a commitment: the intervals that count, and the local day with `each_day`."""

    day: date | None
    intervals: tuple[int, ...]


def rows_of(promise: Promise, calendar: Calendar) -> list[Row]:
    """List the rows of a commitment, in order of time; its first row is credited with `counted_before`.

    A day or a `between` stretch without an interval in the window is no row, and neither is a stretch that
    began before the window.
    """
    eligible = calendar.starting_within(promise.from_, promise.to)
    if not promise.each_day:
        return [Row(None, tuple(eligible))]
    if promise.between is None:
        by_day = [(day, _common(members, eligible)) for day, members in calendar.day_ranges]
        return [Row(day, members) for day, members in by_day if members]
    opening, closing = promise.between
    found = []
    if (opening, closing) not in calendar.stretches:
        calendar.stretches[opening, closing] = _stretches(calendar, opening, closing)
    for day, members in calendar.stretches[opening, closing]:
        began = datetime.combine(day, opening, ZoneInfo(calendar.timezone))
        counted = tuple(k for k in members if k in eligible)
        if began >= calendar.start and counted:
            found.append(Row(day, counted))
    return found


def _common(left: range, right: range) -> tuple[int, ...]:
    return tuple(range(max(left.start, right.start), min(left.stop, right.stop)))


def _stretches(calendar: Calendar, opening: time, closing: time) -> list[tuple[date, list[int]]]:
    by_day: dict[date, list[int]] = {}
    for k, local in enumerate(calendar.local_starts):
        clock = local.time()
        if opening < closing:
            owner = local.date() if opening <= clock < closing else None
        elif clock >= opening:
            owner = local.date()
        else:
            owner = local.date() - timedelta(days=1) if clock < closing else None
        if owner is not None:
            by_day.setdefault(owner, []).append(k)
    return sorted(by_day.items())
