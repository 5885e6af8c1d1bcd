"""Read a window's time axis: intervals, local days, series, outages and the intervals a commitment row counts.

Intervals have equal absolute length; a day is a local day in the window's timezone and owns the intervals that start
in it; the borders of `between` are local wall time, compared with the wall time at which an interval starts.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import UTC, date, datetime, time, timedelta
from math import ceil
from typing import Any
from zoneinfo import ZoneInfo

Job = dict[str, Any]


def given(document: dict[str, Any] | None, key: str, default: Any = None) -> Any:
    """Return a member of a JSON object, or `default` where it is absent or null."""
    value = None if document is None else document.get(key)
    return default if value is None else value


def instant(text: str) -> datetime:
    """Return an RFC 3339 timestamp in UTC.

    Raises ValueError where it carries no offset.
    """
    moment = datetime.fromisoformat(text)
    if moment.tzinfo is None:
        raise ValueError(f"{text} has no offset")
    return moment.astimezone(UTC)


def interval_minutes(text: str) -> int:
    """Return the minutes of an ISO 8601 duration such as PT15M or PT1H.

    Raises ValueError where it is none.
    """
    match = re.fullmatch(r"P(?:(\d+)D)?(?:T(?:(\d+)H)?(?:(\d+)M)?)?", text)
    if match is None:
        raise ValueError(f"{text} is no duration in days, hours and minutes")
    days, hours, minutes = (int(part or 0) for part in match.groups())
    return (days * 24 + hours) * 60 + minutes


@dataclass(frozen=True)
class Clock:
    """Hold the time axis; `starts` are in UTC, `hours` is the length of one interval."""

    starts: list[datetime]
    hours: float
    zone: ZoneInfo

    def __len__(self) -> int:
        return len(self.starts)

    @property
    def step(self) -> timedelta:
        """Return the length of an interval."""
        return timedelta(minutes=round(self.hours * 60))

    def day(self, interval: int) -> date:
        """Return the local day an interval starts in."""
        return self.starts[interval].astimezone(self.zone).date()

    def days(self) -> dict[date, list[int]]:
        """Return the intervals of each local day, in order."""
        found: dict[date, list[int]] = {}
        for t in range(len(self)):
            found.setdefault(self.day(t), []).append(t)
        return found

    def text(self, moment: datetime) -> str:
        """Return an instant as RFC 3339 with the offset of the window's timezone."""
        return moment.astimezone(self.zone).isoformat()

    def wall_minutes(self, interval: int) -> int:
        """Return the local wall time at which an interval starts, in minutes after 00:00."""
        local = self.starts[interval].astimezone(self.zone)
        return local.hour * 60 + local.minute

    def inside(self, start: str | None, end: str | None) -> list[int]:
        """Return the intervals that lie wholly between two timestamps; null is open."""
        return [
            t
            for t, begun in enumerate(self.starts)
            if (start is None or begun >= instant(start)) and (end is None or begun + self.step <= instant(end))
        ]

    def touched(self, start: str | None, end: str | None) -> list[int]:
        """Return the intervals that share time with a span: the span widened outwards to interval borders."""
        return [
            t
            for t, begun in enumerate(self.starts)
            if (start is None or begun + self.step > instant(start)) and (end is None or begun < instant(end))
        ]

    def whole(self, hours: float) -> int:
        """Return a time of the fleet rounded up to whole intervals."""
        return ceil(hours / self.hours - 1e-9)


def read_clock(window: dict[str, Any]) -> Clock:
    """Build the time axis of a window; its length is that of its price arrays.

    Raises ValueError where no price is an array.
    """
    prices = [window.get(key) for key in ("price_per_mwh", "buy_price_per_mwh", "sell_price_per_mwh")]
    lengths = {len(price) for price in prices if isinstance(price, list)}
    if len(lengths) != 1:
        raise ValueError("the price arrays must have one length")
    step = timedelta(minutes=interval_minutes(window["interval"]))
    first = instant(window["start"])
    starts = [first + t * step for t in range(lengths.pop())]
    return Clock(starts, step.total_seconds() / 3600.0, ZoneInfo(window["timezone"]))


def series(value: Any, length: int) -> list[float]:
    """Return a series as one number per interval.

    Raises ValueError where an array has another length.
    """
    if isinstance(value, list):
        if len(value) != length:
            raise ValueError(f"a series has {len(value)} numbers for {length} intervals")
        return [float(number) for number in value]
    return [float(value)] * length


def fractions(job: Job, clock: Clock, asset_id: str, direction: str) -> list[float]:
    """Return what outages leave of an asset's power limit in `direction` (charge or discharge), per interval, 0-1."""
    left = [1.0] * len(clock)
    for outage in given(job, "outages", []):
        if outage["asset"] != asset_id:
            continue
        both = given(outage, "available_fraction")
        fraction = given(outage, f"available_{direction}_fraction", 1.0 if both is None else both)
        for t in clock.touched(given(outage, "from"), given(outage, "to")):
            left[t] = min(left[t], float(fraction))
    return left


@dataclass(frozen=True)
class Span:
    """Hold the intervals one row of a commitment counts; `day` is None where the row is the whole commitment."""

    day: date | None
    intervals: list[int]


def wall(text: str) -> int:
    """Return a wall time such as 16:00 in minutes after 00:00; 24:00 is the end of the day."""
    hours, minutes = text.split(":")[:2]
    return int(hours) * 60 + int(minutes)


def spans(commitment: dict[str, Any], clock: Clock) -> list[Span]:
    """Return the rows of a commitment in time order.

    With `each_day`, a day none of whose intervals count has no row, and neither has a `between` stretch that began
    before the window.
    """
    inside = clock.inside(given(commitment, "from"), given(commitment, "to"))
    if not given(commitment, "each_day", False):
        return [Span(None, inside)]
    between = given(commitment, "between")
    found: dict[date, list[int]] = {}
    for t in inside:
        day = clock.day(t) if between is None else _stretch_day(clock, t, wall(between[0]), wall(between[1]))
        if day is not None:
            found.setdefault(day, []).append(t)
    if between is not None:
        found = {day: span for day, span in found.items() if _begins(clock, day, wall(between[0])) >= clock.starts[0]}
    return [Span(day, found[day]) for day in sorted(found)]


def _stretch_day(clock: Clock, interval: int, first: int, last: int) -> date | None:
    """Return the day whose stretch [first, last) holds the interval; a stretch past midnight is its first day's."""
    minutes, day = clock.wall_minutes(interval), clock.day(interval)
    if first < last:
        return day if first <= minutes < last else None
    if minutes >= first:
        return day
    return day - timedelta(days=1) if minutes < last else None


def _begins(clock: Clock, day: date, minutes: int) -> datetime:
    """Return the instant of a wall time on a day; the earlier of two on the day the clock goes back."""
    return datetime.combine(day, time(minutes // 60, minutes % 60), tzinfo=clock.zone).astimezone(UTC)
