"""A day in a line: two characters an hour that say how much, which way, and whether both ways."""

from datetime import UTC, datetime, timedelta
from math import inf
from zoneinfo import ZoneInfo

import pytest

from service.demo.day_strip import hours_of, ruler, strip


def starts(first: datetime, count: int, minutes: int, zone: str = "UTC") -> list[datetime]:
    return [(first + k * timedelta(minutes=minutes)).astimezone(ZoneInfo(zone)) for k in range(count)]


@pytest.mark.parametrize(
    ("power_mw", "mark"),
    [
        ([0.0, 0.0], " ."),
        ([1e-6, -1e-6], " ."),
        ([1.0, 1.0], "+5"),
        ([2.0, 2.0], "+F"),
        ([2.0, 1.7], "+9"),
        ([0.0, 0.02], "+0"),
        ([-4.0, -4.0], "-F"),
        ([-1.0, -1.0], "-3"),
        ([2.0, -1.0], ">3"),
        ([1.0, -4.0], "<4"),
    ],
)
def test_an_hour_shows_its_mean_as_tenths_of_the_limit_that_way(power_mw: list[float], mark: str) -> None:
    assert strip(power_mw, [range(2)], out_limit_mw=2.0, in_limit_mw=4.0) == mark


def test_without_a_limit_the_highest_power_of_the_day_is_the_measure() -> None:
    assert strip([-0.5, -1.0, 3.0], [range(1), range(1, 2), range(2, 3)], inf, inf) == "-5-F+F"


def test_the_hour_that_autumn_repeats_is_there_twice() -> None:
    # 2027-10-31 in Lisbon: at 01:00 UTC clocks go from 02:00 back to 01:00 (IANA time zone data base).
    day = starts(datetime(2027, 10, 30, 23, 0, tzinfo=UTC), 100, 15, "Europe/Lisbon")
    hours = hours_of(day)
    assert [len(hour) for hour in hours] == [4] * 25
    assert [f"{day[hour[0]]:%H}" for hour in hours][:4] == ["00", "01", "01", "02"]
    assert len(ruler(day)) == 2 * 25


def test_a_day_in_hours_has_one_interval_in_each() -> None:
    day = starts(datetime(2027, 3, 16, tzinfo=UTC), 24, 60)
    assert hours_of(day) == [range(hour, hour + 1) for hour in range(24)]
    assert ruler(day).split() == [f"{hour:02}" for hour in range(0, 24, 2)]
