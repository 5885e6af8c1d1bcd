"""Intervals, local days and rows, on days of 23, 24 and 25 hours."""

import json
from datetime import UTC, date, datetime, time, timedelta
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import pytest

from schemas.calendar import Calendar, Row, rows_of
from schemas.commitments import AppliesTo, EnergyAtLeast
from schemas.instants import read_instant

QUARTER = timedelta(minutes=15)
HOUR = timedelta(hours=1)
SPRING, AUTUMN = date(2026, 3, 29), date(2026, 10, 25)  # Berlin: 23 and 25 hours

# Source: the IANA time zone data base, read with Python's zoneinfo; quarter-hours in a local day, and for some its
# first and last instant.
DAY_LENGTHS: dict[str, Any] = json.loads(
    (Path(__file__).parent.parent / "reference" / "day_lengths.json").read_text(encoding="utf-8")
)
CASES = [
    (zone, date.fromisoformat(day), *found)
    for zone, days in DAY_LENGTHS.items()
    if isinstance(days, dict)
    for day, found in days.items()
]


def local(zone: str, day: date, clock: time = time(0)) -> datetime:
    return datetime.combine(day, clock, ZoneInfo(zone)).astimezone(UTC)


def berlin(day: date, *, hours: int, begin: time = time(0), interval: timedelta = HOUR) -> Calendar:
    return Calendar(
        local("Europe/Berlin", day, begin), interval, round(timedelta(hours=hours) / interval), "Europe/Berlin"
    )


def promise(**members: Any) -> EnergyAtLeast:
    return EnergyAtLeast(id="c", kind="energy_at_least", applies_to=AppliesTo(fleet=True), energy_mwh=1, **members)


@pytest.mark.parametrize("case", CASES, ids=lambda case: f"{case[0]} {case[1]}")
def test_a_local_day_has_its_published_length(case: tuple[Any, ...]) -> None:
    zone, day, quarters, *span = case
    calendar = Calendar(local(zone, day - timedelta(days=1)), QUARTER, 3 * 96 + 8, zone)
    members = dict(calendar.day_ranges)[day]
    assert len(members) == quarters
    assert calendar.starting_within(local(zone, day), local(zone, day + timedelta(days=1))) == members
    if span:
        begin, end = (read_instant(text.replace("Z", ":00Z")) for text in span[0].split("/"))
        assert calendar.start + members.start * QUARTER == begin
        assert calendar.start + members.stop * QUARTER == end


def test_days_follow_one_another_without_a_gap() -> None:
    calendar = berlin(SPRING - timedelta(days=1), hours=72)
    assert [len(members) for _, members in calendar.day_ranges] == [24, 23, 24, 1]
    assert [k for _, members in calendar.day_ranges for k in members] == list(range(72))


def test_the_repeated_hour_stands_twice_with_different_offsets() -> None:
    starts = [start.isoformat() for start in berlin(AUTUMN, hours=25).local_starts]
    assert starts[2:4] == ["2026-10-25T02:00:00+02:00", "2026-10-25T02:00:00+01:00"]
    assert len(set(starts)) == 25


def test_cut_days_are_those_the_window_holds_in_part() -> None:
    day = date(2026, 6, 1)
    next_day = day + timedelta(days=1)
    assert berlin(day, hours=24).cut_days() == ()
    assert berlin(day, hours=48).cut_days() == ()
    assert berlin(day, hours=23).cut_days() == (day,)
    assert berlin(day, hours=25).cut_days() == (next_day,)
    assert berlin(day, hours=24, begin=time(1)).cut_days() == (day, next_day)
    assert berlin(SPRING, hours=23).cut_days() == ()
    assert berlin(SPRING, hours=22).cut_days() == (SPRING,)
    assert berlin(AUTUMN, hours=25).cut_days() == ()
    assert berlin(AUTUMN, hours=24).cut_days() == (AUTUMN,)


def test_borders_lie_on_the_grid_inside_the_window_and_beyond() -> None:
    calendar = berlin(date(2026, 6, 1), hours=24)
    for hours in (-48, 0, 7, 24, 900):
        assert calendar.is_border(calendar.start + hours * HOUR)
        assert not calendar.is_border(calendar.start + hours * HOUR + timedelta(seconds=1))


@pytest.mark.parametrize(
    ("begin", "end", "starting", "touching"),
    [
        (0, 2, range(2), range(2)),
        (0.5, 2, range(1, 2), range(2)),
        (0.5, 2.5, range(1, 3), range(3)),
        (0.25, 0.75, range(1, 1), range(1)),
        (-5, 1, range(1), range(1)),
        (22, 99, range(22, 24), range(22, 24)),
        (-9, -1, range(0), range(0)),
        (30, 40, range(24, 24), range(24, 24)),
        (3, 3, range(3, 3), range(0)),
    ],
)
def test_a_stretch_of_time_takes_the_intervals_that_start_in_it_or_touch_it(
    begin: float, end: float, starting: range, touching: range
) -> None:
    calendar = berlin(date(2026, 6, 1), hours=24)
    first, last = calendar.start + begin * HOUR, calendar.start + end * HOUR
    assert calendar.starting_within(first, last) == starting
    assert calendar.touching(first, last) == touching


def test_an_open_stretch_reaches_to_the_end() -> None:
    calendar = berlin(date(2026, 6, 1), hours=24)
    assert calendar.starting_within(None, None) == range(24)
    assert calendar.touching(calendar.start + 5.5 * HOUR, None) == range(5, 24)


def test_without_each_day_there_is_one_row_even_of_no_interval() -> None:
    calendar = berlin(date(2026, 6, 1), hours=48)
    assert rows_of(promise(), calendar) == [Row(None, tuple(range(48)))]
    later = calendar.end + HOUR
    assert rows_of(promise(**{"from": later}), calendar) == [Row(None, ())]


def test_each_day_with_an_interval_is_a_row() -> None:
    calendar = berlin(SPRING, hours=23 + 24 + 3)
    rows = rows_of(promise(each_day=True), calendar)
    assert [(row.day, len(row.intervals)) for row in rows] == [
        (SPRING, 23),
        (SPRING + timedelta(days=1), 24),
        (SPRING + timedelta(days=2), 3),
    ]
    bounded = promise(each_day=True, **{"from": calendar.start + 23 * HOUR, "to": calendar.start + 25 * HOUR})
    assert rows_of(bounded, calendar) == [Row(SPRING + timedelta(days=1), (23, 24))]


def test_a_stretch_takes_the_intervals_by_the_clock_on_the_wall() -> None:
    calendar = berlin(AUTUMN, hours=25)
    evening = promise(each_day=True, between=[time(16), time(22)])
    assert rows_of(evening, calendar) == [Row(AUTUMN, tuple(range(17, 23)))]
    short = berlin(SPRING, hours=23)
    assert rows_of(evening, short) == [Row(SPRING, tuple(range(15, 21)))]


def test_a_stretch_over_the_repeated_hour_holds_it_twice_and_over_the_missing_hour_not_at_all() -> None:
    night = promise(each_day=True, between=[time(1), time(4)])
    assert rows_of(night, berlin(AUTUMN, hours=25)) == [Row(AUTUMN, (1, 2, 3, 4))]
    assert rows_of(night, berlin(SPRING, hours=23)) == [Row(SPRING, (1, 2))]


def test_a_stretch_over_midnight_belongs_to_the_day_it_starts_in() -> None:
    day = date(2026, 6, 1)
    calendar = berlin(day, hours=48, begin=time(12))
    night = promise(each_day=True, between=[time(22), time(6)])
    assert rows_of(night, calendar) == [
        Row(day, tuple(range(10, 18))),
        Row(day + timedelta(days=1), tuple(range(34, 42))),
    ]


def test_a_stretch_that_began_before_the_window_is_no_row() -> None:
    day = date(2026, 6, 1)
    night = promise(each_day=True, between=[time(22), time(6)])
    assert [row.day for row in rows_of(night, berlin(day, hours=24))] == [day]
    evening = promise(each_day=True, between=[time(16), time(22)])
    assert rows_of(evening, berlin(day, hours=6, begin=time(18))) == []
    assert rows_of(evening, berlin(day, hours=6, begin=time(16))) == [Row(day, tuple(range(6)))]


def test_a_stretch_cut_by_the_end_of_the_window_is_a_row() -> None:
    day = date(2026, 6, 1)
    evening = promise(each_day=True, between=[time(16), time(22)])
    assert rows_of(evening, berlin(day, hours=18)) == [Row(day, (16, 17))]


def test_bounds_cut_a_stretch_but_do_not_move_its_begin() -> None:
    day = date(2026, 6, 1)
    calendar = berlin(day, hours=48)
    bounded = promise(each_day=True, between=[time(16), time(22)], **{"from": calendar.start + 18 * HOUR})
    assert [row.intervals for row in rows_of(bounded, calendar)] == [(18, 19, 20, 21), tuple(range(40, 46))]
