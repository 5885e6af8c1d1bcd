"""Run times, rest times and starts of a store, in hourly intervals."""

from typing import Any

import pytest

from tests.workers.planning.audit.small_jobs import Document, broken, facts, one_store, only, store, window


def runner(**members: Any) -> Document:
    return store(min_discharge_mw=0.5, min_charge_mw=0.5, **members)


def outage(first_hour: int, **left: float) -> Document:
    begin, end = f"2027-03-10T{first_hour:02}:00:00Z", f"2027-03-10T{first_hour + 1:02}:00:00Z"
    return {"asset": "quay-b1", "kind": "forced", "from": begin, "to": end, **left}


def before(power_mw: float, hours: float | None = None) -> Document:
    return {"quay-b1": {"stored_mwh": 5.0, "power_mw": power_mw, "hours_in_state": hours}}


def test_a_run_as_long_as_it_must_be_holds() -> None:
    assert broken(one_store([0.0, 1.0, 1.0, 0.0], asset=runner(min_run_hours=2))) == []


def test_a_shorter_run_breaks_the_run_time() -> None:
    found = only(one_store([0.0, 1.0, 0.0, 0.0], asset=runner(min_run_hours=2)))
    assert (found.rule, found.pointer, found.amount, found.unit) == (
        "min_run",
        "/fleet/assets/0/min_run_hours",
        1.0,
        "h",
    )
    assert found.interval_start is not None
    assert found.interval_start.hour == 1


def test_up_to_a_millionth_of_a_mw_a_store_rests() -> None:
    asset = runner(min_rest_hours=1)
    for idle in (1e-6, -1e-6):
        assert broken(one_store([1.0, idle, 1.0], asset=asset)) == []
        assert broken(one_store([1.0, idle, 1.0], asset=runner(min_rest_hours=2))) == ["min_rest"]


def test_charging_runs_have_the_same_run_time() -> None:
    assert broken(one_store([-1.0, -1.0, 0.0], asset=runner(min_run_hours=2))) == []
    assert broken(one_store([-1.0, 0.0, 0.0], asset=runner(min_run_hours=2))) == ["min_run"]


def test_the_windows_end_cuts_a_run_off() -> None:
    assert broken(one_store([0.0, 0.0, 1.0], asset=runner(min_run_hours=3))) == []


def test_a_run_time_is_rounded_up_to_whole_intervals() -> None:
    assert broken(one_store([1.0, 0.0], asset=runner(min_run_hours=1.0))) == []
    assert broken(one_store([1.0, 0.0], asset=runner(min_run_hours=1.1))) == ["min_run"]
    quarters = window([0.0] * 4, interval="PT15M")
    # 0.7 h is no exact binary number; it is 2.8 quarter-hours and needs three, while 0.75 h is three and needs no more.
    assert broken(one_store([1.0, 1.0, 1.0, 0.0], asset=runner(min_run_hours=0.75), window=quarters)) == []
    assert broken(one_store([1.0, 1.0, 0.0, 0.0], asset=runner(min_run_hours=0.7), window=quarters)) == ["min_run"]


def test_a_change_of_direction_ends_a_run_and_begins_another() -> None:
    assert broken(one_store([1.0, 1.0, -1.0, -1.0, 0.0], asset=runner(min_run_hours=2))) == []
    assert broken(one_store([1.0, -1.0, -1.0, 0.0], asset=runner(min_run_hours=2))) == ["min_run"]


@pytest.mark.parametrize("left", [{}, {"available_fraction": 0.2}, {"available_discharge_fraction": 0.0}])
def test_a_trip_may_cut_a_run_short(left: dict[str, float]) -> None:
    # 0.2 of 2 MW are 0.4 MW, less than the minimum power of 0.5 MW.
    result = one_store([0.0, 1.0, 0.0, 0.0], asset=runner(min_run_hours=3), outages=[outage(2, **left)])
    assert broken(result) == []


@pytest.mark.parametrize("left", [{"available_fraction": 0.25}, {"available_charge_fraction": 0.0}])
def test_an_outage_that_leaves_the_minimum_power_is_no_trip(left: dict[str, float]) -> None:
    result = one_store([0.0, 1.0, 0.0, 0.0], asset=runner(min_run_hours=3), outages=[outage(2, **left)])
    assert broken(result) == ["min_run"]


def test_a_run_of_charging_is_cut_by_what_stops_charging_alone() -> None:
    asset = runner(min_run_hours=3)
    charging = {"available_charge_fraction": 0.0}
    assert broken(one_store([0.0, -1.0, 0.0, 0.0], asset=asset, outages=[outage(2, **charging)])) == []
    discharging = {"available_discharge_fraction": 0.0}
    assert broken(one_store([0.0, -1.0, 0.0, 0.0], asset=asset, outages=[outage(2, **discharging)])) == ["min_run"]


def test_an_outage_after_the_run_has_stopped_is_no_excuse() -> None:
    result = one_store([0.0, 1.0, 0.0, 0.0], asset=runner(min_run_hours=3), outages=[outage(3)])
    assert broken(result) == ["min_run"]


def test_a_run_under_way_counts_the_hours_before_the_window() -> None:
    asset = runner(min_run_hours=3)
    assert broken(one_store([1.0, 0.0, 0.0], asset=asset, initial=before(1.0, 2.0))) == []
    found = only(one_store([0.0, 0.0, 0.0], asset=asset, initial=before(1.0, 2.0)))
    assert facts(found) == ("min_run", "/fleet/assets/0/min_run_hours", "quay-b1", 0, 1.0, "h")
    assert broken(one_store([0.0, 0.0], asset=asset, initial=before(1.0, 2.9))) == ["min_run"]
    assert broken(one_store([0.0, 0.0], asset=asset, initial=before(1.0, 3.0))) == []


def test_hours_before_the_window_count_in_whole_intervals() -> None:
    asset = runner(min_run_hours=1)
    quarters = window([0.0] * 4, interval="PT15M")
    assert broken(one_store([1.0, 0.0, 0.0, 0.0], asset=asset, window=quarters, initial=before(1.0, 0.75))) == []
    assert broken(one_store([1.0, 0.0, 0.0, 0.0], asset=asset, window=quarters, initial=before(1.0, 0.74))) == [
        "min_run"
    ]
    found = only(one_store([0.0] * 4, asset=asset, window=quarters, initial=before(1.0, 0.25)))
    assert found.amount == 0.75


def test_a_run_of_one_interval_that_is_under_way_is_finished() -> None:
    asset = runner(min_run_hours=1)
    assert broken(one_store([1.0, 0.0], asset=asset, initial=before(1.0, 0.5))) == []
    found = only(one_store([0.0, 0.0], asset=asset, initial=before(1.0, 0.5)))
    assert facts(found) == ("min_run", "/fleet/assets/0/min_run_hours", "quay-b1", 0, 1.0, "h")


def test_a_run_under_way_for_an_unknown_time_may_stop() -> None:
    assert broken(one_store([0.0, 0.0], asset=runner(min_run_hours=3), initial=before(-1.0))) == []


def test_a_run_under_way_may_stop_by_a_trip() -> None:
    result = one_store([0.0, 0.0], asset=runner(min_run_hours=3), initial=before(1.0, 1.0), outages=[outage(0)])
    assert broken(result) == []


def test_a_run_the_other_way_from_the_one_under_way_is_a_new_run() -> None:
    asset = runner(min_run_hours=2)
    assert broken(one_store([-1.0, -1.0, 0.0], asset=asset, initial=before(1.0, 2.0))) == []
    assert broken(one_store([-1.0, 0.0, 0.0], asset=asset, initial=before(1.0, 2.0))) == ["min_run"]
    assert broken(one_store([-1.0, -1.0, 0.0], asset=asset, initial=before(1.0, 1.0))) == ["min_run"]


def test_a_rest_as_long_as_it_must_be_holds() -> None:
    assert broken(one_store([1.0, 0.0, 0.0, 1.0], asset=runner(min_rest_hours=2))) == []


def test_a_shorter_rest_breaks_the_rest_time() -> None:
    found = only(one_store([1.0, 0.0, 1.0, 0.0], asset=runner(min_rest_hours=2)))
    assert facts(found) == ("min_rest", "/fleet/assets/0/min_rest_hours", "quay-b1", 2, 1.0, "h")


def test_a_rest_of_one_interval_binds() -> None:
    assert broken(one_store([1.0, 0.0, -1.0], asset=runner(min_rest_hours=1))) == []
    found = only(one_store([1.0, -1.0], asset=runner(min_rest_hours=1)))
    assert facts(found) == ("min_rest", "/fleet/assets/0/min_rest_hours", "quay-b1", 1, 1.0, "h")


def test_a_change_of_direction_without_a_pause_breaks_a_rest_time_and_nothing_else() -> None:
    found = only(one_store([1.0, -1.0], asset=runner(min_rest_hours=2)))
    assert (found.rule, found.amount) == ("min_rest", 2.0)
    assert broken(one_store([1.0, -1.0], asset=runner(min_run_hours=1))) == []


def test_rest_before_the_window_counts() -> None:
    asset = runner(min_rest_hours=2)
    assert broken(one_store([1.0, 1.0], asset=asset, initial=before(0.0))) == []
    assert broken(one_store([0.0, 1.0], asset=asset, initial=before(0.0, 1.0))) == []
    found = only(one_store([1.0, 1.0], asset=asset, initial=before(0.0, 1.0)))
    assert (found.rule, found.amount) == ("min_rest", 1.0)


def test_a_run_that_was_under_way_is_followed_by_a_whole_rest() -> None:
    asset = runner(min_rest_hours=2)
    assert broken(one_store([0.0, 0.0, 1.0], asset=asset, initial=before(1.0))) == []
    found = only(one_store([0.0, 1.0, 1.0], asset=asset, initial=before(1.0)))
    assert (found.rule, found.amount) == ("min_rest", 1.0)
    assert broken(one_store([1.0, 0.0, 0.0, 1.0], asset=asset, initial=before(1.0))) == []
    assert broken(one_store([1.0, 0.0, 1.0, 1.0], asset=asset, initial=before(1.0))) == ["min_rest"]


def test_a_rest_is_due_after_a_trip_too() -> None:
    asset = runner(min_run_hours=3, min_rest_hours=2)
    assert broken(one_store([1.0, 0.0, 0.0, 1.0], asset=asset, outages=[outage(1)])) == []
    assert broken(one_store([1.0, 0.0, 1.0, 1.0], asset=asset, outages=[outage(1)])) == ["min_rest"]


def test_as_many_starts_as_allowed_hold_and_one_more_breaks() -> None:
    asset = runner(max_starts_per_day=2)
    assert broken(one_store([1.0, 0.0, 1.0, 1.0, 0.0], asset=asset)) == []
    found = only(one_store([1.0, 0.0, 1.0, 0.0, 1.0], asset=asset))
    where = "/fleet/assets/0/max_starts_per_day"
    assert facts(found) == ("max_starts_per_day", where, "quay-b1", 0, 1.0, "starts")
    # One before the window and two in it are one more than two.
    counted = {"assets": {"quay-b1": {"starts": 1}}}
    found = only(one_store([1.0, 0.0, 1.0], asset=asset, counted_before=counted))
    assert facts(found) == ("max_starts_per_day", where, "quay-b1", 0, 1.0, "starts")


def test_a_change_of_direction_is_a_start() -> None:
    assert broken(one_store([1.0, -1.0], asset=runner(max_starts_per_day=2))) == []
    assert broken(one_store([1.0, -1.0], asset=runner(max_starts_per_day=1))) == ["max_starts_per_day"]


def test_a_run_under_way_is_no_start_but_one_the_other_way_is() -> None:
    asset = runner(max_starts_per_day=0)
    assert broken(one_store([1.0, 0.0], asset=asset, initial=before(1.0))) == []
    assert broken(one_store([-1.0, 0.0], asset=asset, initial=before(1.0))) == ["max_starts_per_day"]
    assert broken(one_store([1.0, 0.0], asset=asset, initial=before(0.0))) == ["max_starts_per_day"]


def test_a_day_that_had_more_starts_than_it_may_has_none_left_and_owes_none() -> None:
    asset, counted = runner(max_starts_per_day=1), {"assets": {"quay-b1": {"starts": 3}}}
    assert broken(one_store([0.0, 0.0], asset=asset, counted_before=counted)) == []
    found = only(one_store([0.0, 1.0], asset=asset, counted_before=counted))
    assert (found.rule, found.amount) == ("max_starts_per_day", 1.0)


def test_starts_before_the_window_count_towards_its_first_day_only() -> None:
    asset = runner(max_starts_per_day=1)
    market = window([0.0] * 4, start="2027-03-10T22:00:00+00:00")
    counted = {"assets": {"quay-b1": {"starts": 1}}}
    assert broken(one_store([0.0, 0.0, 1.0, 0.0], asset=asset, window=market, counted_before=counted)) == []
    assert broken(one_store([0.0, 1.0, 0.0, 0.0], asset=asset, window=market, counted_before=counted)) == [
        "max_starts_per_day"
    ]
    assert broken(one_store([0.0, 1.0, 0.0, 1.0], asset=asset, window=market)) == []
    assert broken(one_store([1.0, 0.0, 0.0, 1.0], asset=asset, window=market)) == []
    # A run over midnight started once, the day before.
    assert broken(one_store([0.0, 1.0, 1.0, 0.0], asset=asset, window=market)) == []
