"""Points in time, lengths of time and time zones, as they are written on the wire."""

import re
from datetime import datetime, time, timedelta
from functools import lru_cache
from typing import Annotated, Any
from zoneinfo import ZoneInfo, available_timezones

from pydantic import PlainSerializer, PlainValidator, WithJsonSchema
from pydantic_core import PydanticCustomError

_RFC_3339 = re.compile(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d(\.\d{1,6})?(Z|[+-]\d\d:\d\d)", re.IGNORECASE | re.ASCII)
_DURATION = re.compile(r"PT(?=\d)(?:(\d{1,2})H)?(?:(\d{1,4})M)?", re.ASCII)
_CLOCK = re.compile(r"([01]\d|2[0-3]):[0-5]\d", re.ASCII)
_DAY_MINUTES = 1440
_FIRST_YEAR, _LAST_YEAR = 1970, 2200


def _not_text(value: Any, what: str) -> PydanticCustomError | None:
    return None if isinstance(value, str) else PydanticCustomError("not_text", f"{what} is written as a string")


def read_instant(value: Any) -> datetime:
    """Read an RFC 3339 timestamp; one without an offset is refused, since it is ambiguous on a 25-hour day."""
    if isinstance(value, datetime) and value.tzinfo is not None:
        return value
    if wrong := _not_text(value, "a timestamp"):
        raise wrong
    if not _RFC_3339.fullmatch(value):
        if re.fullmatch(r"\d{4}-\d\d-\d\d[Tt ]\d\d:\d\d(:\d\d(\.\d+)?)?", value, re.ASCII):
            raise PydanticCustomError("no_offset", "a local time without an offset is ambiguous: add Z or +hh:mm")
        raise PydanticCustomError("not_a_timestamp", "not an RFC 3339 timestamp such as 2027-03-14T00:00:00+00:00")
    try:
        instant = datetime.fromisoformat(value.upper())
    except ValueError as fault:
        raise PydanticCustomError("not_a_timestamp", "no such date or time of day") from fault
    if not _FIRST_YEAR <= instant.year <= _LAST_YEAR:
        raise PydanticCustomError("out_of_range", "the year lies outside 1970-2200")
    return instant


def write_instant(instant: datetime) -> str:
    """Write an instant with its numeric offset, seconds included."""
    return instant.isoformat()


def read_interval(value: Any) -> timedelta:
    """Read an ISO 8601 duration in hours and minutes, 1 minute to one day."""
    if isinstance(value, timedelta):
        return value
    if wrong := _not_text(value, "a duration"):
        raise wrong
    found = _DURATION.fullmatch(value)
    if not found:
        raise PydanticCustomError("not_a_duration", "not an ISO 8601 duration in whole minutes such as PT15M")
    minutes = int(found[1] or 0) * 60 + int(found[2] or 0)
    if not 1 <= minutes <= _DAY_MINUTES:
        raise PydanticCustomError("out_of_range", "an interval is 1 to 1440 minutes long")
    return timedelta(minutes=minutes)


def write_interval(interval: timedelta) -> str:
    """Write a length of time in minutes: PT15M."""
    return f"PT{round(interval.total_seconds() / 60)}M"


@lru_cache(maxsize=1)
def _zones() -> frozenset[str]:
    # Names that mean something else on each machine, or nothing, are no place's time.
    return frozenset(available_timezones() - {"localtime", "posixrules", "Factory"})


def read_zone(value: Any) -> str:
    """Read the name of a time zone of the IANA data base."""
    if wrong := _not_text(value, "a time zone"):
        raise wrong
    if value not in _zones():
        raise PydanticCustomError("unknown_zone", "not a time zone of the IANA data base such as Europe/Lisbon")
    ZoneInfo(value)
    return str(value)


def read_clock(value: Any) -> time:
    """Read a local wall time hh:mm."""
    if isinstance(value, time):
        return value
    if wrong := _not_text(value, "a time of day"):
        raise wrong
    if not _CLOCK.fullmatch(value):
        raise PydanticCustomError("not_a_time_of_day", "not a time of day such as 16:00")
    return time.fromisoformat(value)


def write_clock(clock: time) -> str:
    """Write a wall time as hh:mm."""
    return clock.strftime("%H:%M")


Instant = Annotated[
    datetime,
    PlainValidator(read_instant),
    PlainSerializer(write_instant, return_type=str),
    WithJsonSchema({"type": "string", "format": "date-time"}),
]
IntervalLength = Annotated[
    timedelta,
    PlainValidator(read_interval),
    PlainSerializer(write_interval, return_type=str),
    WithJsonSchema({"type": "string", "format": "duration", "pattern": "^PT(?=[0-9])([0-9]{1,2}H)?([0-9]{1,4}M)?$"}),
]
ZoneName = Annotated[str, PlainValidator(read_zone), WithJsonSchema({"type": "string", "examples": ["Europe/Lisbon"]})]
WallTime = Annotated[
    time,
    PlainValidator(read_clock),
    PlainSerializer(write_clock, return_type=str),
    WithJsonSchema({"type": "string", "pattern": "^([01][0-9]|2[0-3]):[0-5][0-9]$"}),
]
