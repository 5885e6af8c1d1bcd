"""Count the window's intervals, its local days and the hours of a rule, in whole microseconds of absolute time.

This is the audit's own clock: it shares no code with the one that plans, so that a fault in either is seen.
"""

import math
from collections.abc import Sequence
from datetime import UTC, date, datetime, time, timedelta
from zoneinfo import ZoneInfo

from schemas.window import Window

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_MICROSECOND = timedelta(microseconds=1)
_MINUTE = 60_000_000
_ROUNDING = 1e-9
"""Part of an interval that hours written as decimal fractions may be off: 0.1 h is no exact binary number."""


def ticks(instant: datetime) -> int:
    """Return microseconds from 1970-01-01T00:00Z to an instant, negative before it."""
    return (instant - _EPOCH) // _MICROSECOND


class Clock:
    """The intervals of a window: `count` of them, each `hours` long, interval t starting at `starts[t]`.

    `starts` carry the zone's offset; `days` maps each local day to the intervals that start in it, in order of time.
    Raises ValueError when no price of the window is an array, since nothing else says how many intervals there are.
    """

    def __init__(self, window: Window) -> None:
        self.count = window.intervals
        if self.count < 1:
            raise ValueError("no price of the window is an array: its number of intervals is unknown")
        self._step = window.interval // _MICROSECOND
        self._minutes = self._step / _MINUTE
        self.hours = self._minutes / 60
        self._first = ticks(window.start)
        self._zone = ZoneInfo(window.timezone)
        self.starts = [self._local(self._first + t * self._step) for t in range(self.count)]
        self.days: dict[date, list[int]] = {}
        for t, start in enumerate(self.starts):
            self.days.setdefault(start.date(), []).append(t)
        self.first_day = self.starts[0].date()
        self._nightly: dict[tuple[time, time], dict[date, list[int]]] = {}

    def _local(self, tick: int) -> datetime:
        return (_EPOCH + tick * _MICROSECOND).astimezone(self._zone)

    def end_of(self, interval: int) -> datetime:
        """Return when an interval ends, with the zone's offset then."""
        return self._local(self._first + (interval + 1) * self._step)

    def hours_of(self, intervals: int) -> float:
        """Return how long so many intervals last."""
        return intervals * self._minutes / 60

    def intervals_needed(self, hours: float) -> int:
        """Return how many intervals hold so many hours: rounded up to whole ones."""
        return math.ceil(hours / self.hours - _ROUNDING)

    def intervals_passed(self, hours: float) -> int:
        """Return how many whole intervals went by in so many hours."""
        return math.floor(hours / self.hours + _ROUNDING)

    def starting_within(self, begin: datetime | None, end: datetime | None) -> range:
        """Return the intervals that start at or after `begin` and before `end`; an absent border is open."""
        first = 0 if begin is None else self._borders_before(begin)
        last = self.count if end is None else self._borders_before(end)
        return range(first, max(first, last))

    def touched_by(self, begin: datetime, end: datetime | None) -> range:
        """Return the intervals that share any time with the stretch from `begin` to `end`, open where absent."""
        if end is not None and ticks(end) <= ticks(begin):
            return range(0)
        first = min(self.count, max(0, (ticks(begin) - self._first) // self._step))
        last = self.count if end is None else self._borders_before(end)
        return range(first, max(first, last))

    def _borders_before(self, instant: datetime) -> int:
        borders = -((self._first - ticks(instant)) // self._step)
        return min(self.count, max(0, borders))

    def blocks(self, hours: float) -> list[list[int]]:
        """Return the intervals of each block of so many hours, counted from each local midnight by absolute time."""
        length = max(1, round(hours * 60 * _MINUTE))
        found: list[list[int]] = []
        for day, members in self.days.items():
            midnight = ticks(datetime.combine(day, time(0), self._zone))
            previous = None
            for t in members:
                number = (self._first + t * self._step - midnight) // length
                if number != previous:
                    found.append([])
                found[-1].append(t)
                previous = number
        return found

    def between(self, opening: time, closing: time) -> dict[date, list[int]]:
        """Return, by the local day it opens in, the intervals of each stretch of local wall time.

        A stretch that closes at or before it opens passes midnight. One that opened before the window is left out.
        Wall times that occur twice, as clocks go back, are in it twice.
        """
        if (opening, closing) not in self._nightly:
            self._nightly[opening, closing] = self._stretches(opening, closing)
        return self._nightly[opening, closing]

    def _stretches(self, opening: time, closing: time) -> dict[date, list[int]]:
        passes_midnight = closing <= opening
        found: dict[date, list[int]] = {}
        for t, start in enumerate(self.starts):
            wall, day = start.time(), start.date()
            if wall >= opening and (passes_midnight or wall < closing):
                found.setdefault(day, []).append(t)
            elif passes_midnight and wall < closing:
                found.setdefault(day - timedelta(days=1), []).append(t)
        return {day: found[day] for day in sorted(found) if self._opens_in_the_window(day, opening)}

    def _opens_in_the_window(self, day: date, opening: time) -> bool:
        return ticks(datetime.combine(day, opening, self._zone)) >= self._first


def whole_series(value: float | Sequence[float], count: int, what: str) -> list[float]:
    """Return a series as one number per interval; raise ValueError where an array has another length."""
    if isinstance(value, int | float):
        return [float(value)] * count
    if len(value) != count:
        raise ValueError(f"{what} has {len(value)} values for {count} intervals")
    return list(value)
