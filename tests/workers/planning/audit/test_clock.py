"""Days of 23, 25 and other hours, in the audit's own arithmetic."""

import json
from datetime import datetime, time, timedelta
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import pytest

from tests.workers.planning.audit.small_jobs import Document, one_store, store, window

# Quarter-hours of local days, computed with the IANA time zone data base. The 92 and 100 agree with published texts: 46
# and 50 half-hour settlement periods in Great Britain (Elexon), the joint allocation office's notice for 2024-03-31.
DAY_LENGTHS = json.loads((Path(__file__).parents[3] / "reference" / "day_lengths.json").read_text(encoding="utf-8"))
DAYS = [
    (zone, day, figures[0])
    for zone, days in DAY_LENGTHS.items()
    if not zone.startswith("_")
    for day, figures in days.items()
]


def local(zone: str, day: str, clock: str = "00:00") -> str:
    return datetime.fromisoformat(f"{day}T{clock}").replace(tzinfo=ZoneInfo(zone)).isoformat()


def market(zone: str, start: str, quarters: int, interval: str = "PT15M") -> Document:
    return window([0.0] * quarters, start=start, timezone=zone, interval=interval)


def rows(market_: Document, power: list[float], **members: Any) -> list[tuple[str | None, float | None]]:
    """Return day and delivered hours of each row of a daily commitment of 1 MW."""
    promise = {
        "id": "firm",
        "kind": "hours_at_least",
        "applies_to": {"assets": ["quay-b1"]},
        "threshold": {"mw": 1.0},
        "hours": 1.0,
        "each_day": True,
        "shortfall_price_per_hour": 0.0,
        **members,
    }
    big = store(energy_capacity_mwh=1000.0)
    initial = {"quay-b1": {"stored_mwh": 500.0}}
    result = one_store(power, asset=big, initial=initial, window=market_, commitments=[promise])
    return [(row.day, row.delivered_hours) for row in result.commitments]


def test_the_reference_days_are_there() -> None:
    assert {length for _, _, length in DAYS} == {92, 94, 96, 98, 100}


@pytest.mark.parametrize(("zone", "day", "quarters"), DAYS)
def test_a_local_day_holds_as_many_quarter_hours_as_its_clocks_pass(zone: str, day: str, quarters: int) -> None:
    after = (datetime.fromisoformat(day) + timedelta(days=1)).date().isoformat()
    found = rows(market(zone, local(zone, day), quarters + 1), [1.0] * (quarters + 1))
    assert found == [(day, quarters / 4), (after, 0.25)]


@pytest.mark.parametrize(
    ("day", "span"), [(day, figures[1]) for day, figures in DAY_LENGTHS["Europe/Berlin"].items() if len(figures) > 1]
)
def test_a_day_starts_and_ends_at_the_published_instants(day: str, span: str) -> None:
    start, end = (datetime.fromisoformat(border.replace("Z", "+00:00")) for border in span.split("/"))
    quarters = (end - start) // timedelta(minutes=15)
    before = start - timedelta(minutes=15)
    found = rows(market("Europe/Berlin", before.isoformat(), quarters + 2), [1.0] * (quarters + 2))
    assert [hours for _, hours in found] == [0.25, quarters / 4, 0.25]
    assert found[1][0] == day


def test_half_hours_of_a_half_hour_shift_are_whole() -> None:
    found = rows(market("Australia/Lord_Howe", local("Australia/Lord_Howe", "2025-04-06"), 49, "PT30M"), [1.0] * 49)
    assert found == [("2025-04-06", 24.5)]
    found = rows(market("Australia/Lord_Howe", local("Australia/Lord_Howe", "2025-10-05"), 47, "PT30M"), [1.0] * 47)
    assert found == [("2025-10-05", 23.5)]


def test_interval_starts_carry_the_offset_of_their_instant() -> None:
    result = one_store([0.0] * 4, window=market("Europe/Berlin", "2025-10-26T00:00:00Z", 4, "PT60M"))
    assert [start.isoformat() for start in result.interval_starts] == [
        "2025-10-26T02:00:00+02:00",
        "2025-10-26T02:00:00+01:00",
        "2025-10-26T03:00:00+01:00",
        "2025-10-26T04:00:00+01:00",
    ]


def test_wall_times_that_occur_twice_count_twice() -> None:
    long_day = market("Europe/Berlin", local("Europe/Berlin", "2025-10-26"), 100)
    assert rows(long_day, [1.0] * 100, between=["02:00", "03:00"]) == [("2025-10-26", 2.0)]


def test_a_stretch_broken_by_the_clocks_is_two_blocks() -> None:
    long_day = market("Europe/Berlin", local("Europe/Berlin", "2025-10-26"), 100)
    # 02:30 to 03:00 comes twice, half an hour apart: 1 h in all, in two blocks of half an hour.
    assert rows(long_day, [1.0] * 100, between=["02:30", "03:00"], min_block_hours=0.5) == [("2025-10-26", 1.0)]
    assert rows(long_day, [1.0] * 100, between=["02:30", "03:00"], min_block_hours=0.75) == [("2025-10-26", 0.0)]


def test_wall_times_that_never_occur_are_no_row() -> None:
    short_day = market("Europe/Berlin", local("Europe/Berlin", "2025-03-30"), 92)
    assert rows(short_day, [1.0] * 92, between=["02:00", "03:00"]) == []
    assert rows(short_day, [1.0] * 92, between=["01:00", "04:00"]) == [("2025-03-30", 2.0)]


def test_between_over_the_midnight_before_a_clock_change_has_an_hour_more_or_less() -> None:
    for day, after, hours in (("2025-10-25", "2025-10-26", 7.0), ("2025-03-29", "2025-03-30", 5.0)):
        start = local("Europe/Berlin", day, "12:00")
        quarters = 4 * 24
        found = rows(market("Europe/Berlin", start, quarters), [1.0] * quarters, between=["22:00", "04:00"])
        assert found == [(day, hours)], after


def test_a_night_cut_by_the_windows_end_is_a_row_and_one_begun_before_it_is_none() -> None:
    start = local("Europe/Berlin", "2025-10-26")
    # 25 h from midnight: 00-04 belongs to the 25th's stretch, which began before; 22-24 is the 26th's, cut off.
    assert rows(market("Europe/Berlin", start, 100), [1.0] * 100, between=["22:00", "04:00"]) == [("2025-10-26", 2.0)]


def test_intervals_of_odd_length_belong_to_the_day_they_start_in() -> None:
    # 7 h from 20:00: starts at 20:00, 03:00, 10:00, 17:00, 00:00.
    found = rows(market("UTC", "2027-03-10T20:00:00Z", 5, "PT7H"), [1.0] * 5)
    assert found == [("2027-03-10", 7.0), ("2027-03-11", 21.0), ("2027-03-12", 7.0)]


def test_a_window_may_start_between_the_quarters() -> None:
    start = datetime(2027, 3, 10, 0, 7, tzinfo=ZoneInfo("UTC"))
    borders = {"from": (start + timedelta(minutes=15)).isoformat()}
    assert rows(market("UTC", start.isoformat(), 3), [1.0] * 3, **borders) == [("2027-03-10", 0.5)]


def test_days_of_a_zone_that_changes_its_clocks_at_midnight_stay_whole() -> None:
    # Santiago puts its clocks back at midnight, so that 23:00 to 24:00 comes twice on the day before.
    zone = "America/Santiago"
    day = datetime(2027, 4, 3, tzinfo=ZoneInfo(zone))
    following = datetime.combine(day.date() + timedelta(days=1), time(0), ZoneInfo(zone))
    hours = round((following.timestamp() - day.timestamp()) / 3600)
    assert hours == 25
    found = rows(market(zone, day.isoformat(), 26, "PT60M"), [1.0] * 26)
    assert found == [("2027-04-03", 25.0), ("2027-04-04", 1.0)]
