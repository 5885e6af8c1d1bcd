"""Minimum up and down times and start costs, in hourly intervals where nothing else is said."""

from typing import Any

import pytest

from tests.workers.planning.audit.small_jobs import (
    Document,
    broken,
    facts,
    generator,
    one_generator,
    only,
    outage,
    window,
)

STARTS: list[Document] = [{"after_hours_off": 0.0, "cost": 40.0}, {"after_hours_off": 6.0, "cost": 90.0}]


def on_in(pattern: str, initial: Document | None = None, asset: Document | None = None, **members: Any) -> Any:
    """Audit a generator that is on at 1 MW where the pattern has an x."""
    given = {} if initial is None else {"initial": {"quay-g1": initial}}
    power = [float(mark == "x") for mark in pattern]
    return one_generator(power, [mark == "x" for mark in pattern], asset=asset, **given, **members)


def test_a_generator_stays_on_for_its_minimum_up_time() -> None:
    asset = generator(min_up_hours=2.0)
    assert broken(on_in(".xx.", asset=asset)) == []
    found = only(on_in(".x..", asset=asset))
    assert (found.rule, found.pointer, found.amount, found.unit) == ("min_up", "/fleet/assets/0/min_up_hours", 1.0, "h")
    assert found.interval_start is not None
    assert found.interval_start.hour == 1


def test_a_generator_stays_off_for_its_minimum_down_time() -> None:
    asset = generator(min_down_hours=2.0)
    assert broken(on_in("x..x", asset=asset)) == []
    found = only(on_in("xx.x", asset=asset))
    assert facts(found) == ("min_down", "/fleet/assets/0/min_down_hours", "quay-g1", 3, 1.0, "h")


def test_times_are_rounded_up_to_whole_intervals() -> None:
    assert broken(on_in(".x..", asset=generator(min_up_hours=1.01))) == ["min_up"]
    assert broken(on_in("xx.x", asset=generator(min_down_hours=1.01))) == ["min_down"]
    assert broken(on_in(".xx.", asset=generator(min_up_hours=1.01))) == []
    half_hours = window([0.0] * 4, interval="PT30M")
    assert broken(on_in(".xx.", asset=generator(min_up_hours=1.0), window=half_hours)) == []


def test_the_windows_end_cuts_off_a_minimum_up_time() -> None:
    assert broken(on_in("...x", asset=generator(min_up_hours=3.0))) == []


def test_the_state_before_the_window_binds_across_its_start() -> None:
    up, down = generator(min_up_hours=4.0), generator(min_down_hours=4.0)
    on, off = {"on": True, "hours_in_state": 2.0}, {"on": False, "hours_in_state": 2.0}
    assert broken(on_in("xx..", on, up)) == []
    assert only(on_in("x...", on, up)).amount == 1.0
    assert only(on_in("....", on, up)).amount == 2.0
    assert broken(on_in("..xx", off, down)) == []
    assert only(on_in(".xxx", off, down)).amount == 1.0
    # A begun interval does not count: 2.9 hours are two intervals gone.
    assert only(on_in(".xxx", {"on": False, "hours_in_state": 2.9}, down)).amount == 1.0


def test_a_state_begun_within_the_hour_before_the_window_lasts_an_hour_in_it() -> None:
    # Of the half hour before the window no whole interval has passed.
    found = only(on_in("...", {"on": True, "hours_in_state": 0.5}, generator(min_up_hours=1.0)))
    assert facts(found) == ("min_up", "/fleet/assets/0/min_up_hours", "quay-g1", 0, 1.0, "h")
    assert broken(on_in("x..", {"on": True, "hours_in_state": 0.5}, generator(min_up_hours=1.0))) == []
    found = only(on_in("xx.", {"on": False, "hours_in_state": 0.5}, generator(min_down_hours=1.0)))
    assert facts(found) == ("min_down", "/fleet/assets/0/min_down_hours", "quay-g1", 0, 1.0, "h")
    assert broken(on_in(".x.", {"on": False, "hours_in_state": 0.5}, generator(min_down_hours=1.0))) == []


def test_a_state_of_unknown_length_lasted_long_enough() -> None:
    asset = generator(min_up_hours=24.0, min_down_hours=24.0)
    assert broken(on_in("....", {"on": True}, asset)) == []
    assert broken(on_in("x", {"on": False}, asset)) == []
    assert broken(on_in("x", None, asset)) == []


def test_a_run_that_ended_with_the_window_begins_a_time_off() -> None:
    asset = generator(min_down_hours=2.0)
    on = {"on": True, "hours_in_state": 9.0}
    assert broken(on_in("..x", on, asset)) == []
    assert broken(on_in(".xx", on, asset)) == ["min_down"]


def test_a_trip_voids_the_minimum_up_time_and_not_the_minimum_down_time() -> None:
    asset = generator(min_up_hours=3.0, min_down_hours=2.0)
    tripped = [outage("quay-g1", 1, 2, 0.2)]
    assert broken(on_in("x..xxx", asset=asset, outages=tripped)) == []
    assert broken(on_in("x.xxxx", asset=asset, outages=tripped)) == ["min_down"]
    # Half of 4 MW is more than the 1 MW it needs: no trip.
    assert broken(on_in("x..xxx", asset=asset, outages=[outage("quay-g1", 1, 2, 0.5)])) == ["min_up"]
    # It stops before the outage begins: no trip either.
    assert broken(on_in("x...xx", asset=asset, outages=[outage("quay-g1", 2, 3)])) == ["min_up"]


def test_a_trip_in_the_first_interval_ends_the_run_under_way() -> None:
    asset = generator(min_up_hours=3.0)
    on = {"on": True, "hours_in_state": 1.0}
    assert broken(on_in("....", on, asset, outages=[outage("quay-g1", 0, 1)])) == []
    assert broken(on_in("....", on, asset)) == ["min_up"]


@pytest.mark.parametrize(
    ("pattern", "initial", "cost"),
    [
        ("x", {"on": True, "hours_in_state": 1.0}, 0.0),
        ("x", {"on": False, "hours_in_state": 5.99}, 40.0),
        ("x", {"on": False, "hours_in_state": 6.0}, 90.0),
        (".x", {"on": False, "hours_in_state": 5.0}, 90.0),
        (".x", {"on": False, "hours_in_state": 4.5}, 40.0),
        ("x", None, 90.0),
        ("x", {"on": False}, 90.0),
        (".x", {"on": True, "hours_in_state": 50.0}, 40.0),
        ("......x", {"on": True}, 90.0),
        (".....x", {"on": True}, 40.0),
        ("x......x", {"on": True}, 90.0),
        ("x.....x.x", None, 90.0 + 40.0 + 40.0),
        ("....", None, 0.0),
    ],
)
def test_a_start_pays_the_last_entry_its_hours_off_reach(pattern: str, initial: Document | None, cost: float) -> None:
    result = on_in(pattern, initial, generator(start_costs=STARTS))
    assert broken(result) == []
    assert result.totals.start_cost == result.assets[0].totals.start_cost == cost
    assert result.margin == -cost


def test_a_start_after_a_trip_is_paid_for() -> None:
    outages = [outage("quay-g1", 1, 2)]
    assert on_in("x.x", {"on": True}, generator(start_costs=STARTS), outages=outages).totals.start_cost == 40.0


def test_a_start_costs_nothing_where_nothing_is_said() -> None:
    assert on_in("x.x").totals.start_cost == 0.0


def test_hours_off_written_as_decimal_fractions_reach_an_entry() -> None:
    entries = [{"after_hours_off": 0.0, "cost": 1.0}, {"after_hours_off": 0.3, "cost": 2.0}]
    six_minutes = window([0.0] * 4, interval="PT6M")
    result = on_in("...x", {"on": True}, generator(start_costs=entries), window=six_minutes)
    assert result.totals.start_cost == 2.0
