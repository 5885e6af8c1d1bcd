"""Ramps of a generator, with the first and the last interval of its runs."""

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

RISING = generator(ramp_up_mw_per_hour=1.5)
FALLING = generator(ramp_down_mw_per_hour=1.5)


def begun_at(output: float, power: list[float], asset: Document, **members: Any) -> Any:
    return one_generator(power, asset=asset, initial={"quay-g1": {"on": True, "output_mw": output}}, **members)


def test_output_rises_as_fast_as_its_ramp_and_no_faster() -> None:
    assert broken(begun_at(1.0, [2.5, 4.0], RISING)) == []
    found = only(begun_at(1.0, [2.5, 4.0, 1.0, 2.75], RISING))
    assert facts(found) == ("ramp_up", "/fleet/assets/0/ramp_up_mw_per_hour", "quay-g1", 3, 0.25, "MW")
    assert only(begun_at(1.0, [2.75], RISING)).amount == 0.25


def test_output_falls_as_fast_as_its_ramp_and_no_faster() -> None:
    assert broken(begun_at(4.0, [2.5, 1.0], FALLING)) == []
    found = only(begun_at(4.0, [4.0, 2.25], FALLING))
    assert (found.rule, found.pointer, found.amount) == ("ramp_down", "/fleet/assets/0/ramp_down_mw_per_hour", 0.25)
    assert only(begun_at(4.0, [2.25], FALLING)).amount == 0.25


def test_a_ramp_is_by_the_hour() -> None:
    quarters = window([0.0, 0.0], interval="PT15M")
    assert broken(begun_at(1.0, [1.375, 1.75], RISING, window=quarters)) == []
    assert broken(begun_at(1.0, [1.375, 1.8], RISING, window=quarters)) == ["ramp_up"]


@pytest.mark.parametrize(("ramp", "most"), [(1.5, 1.5), (0.5, 1.0)])
def test_a_run_begins_and_ends_at_the_larger_of_minimum_and_ramp(ramp: float, most: float) -> None:
    rising = generator(ramp_up_mw_per_hour=ramp)
    assert broken(one_generator([0.0, most], asset=rising)) == []
    assert broken(one_generator([0.0, most + 0.1], asset=rising)) == ["ramp_up"]
    falling = generator(ramp_down_mw_per_hour=ramp)
    assert broken(one_generator([most, 0.0], asset=falling)) == []
    assert broken(one_generator([most + 0.1, 0.0], asset=falling)) == ["ramp_down"]


def test_a_start_in_the_first_interval_is_one_from_off() -> None:
    assert broken(one_generator([1.5], asset=RISING)) == []
    assert broken(one_generator([1.6], asset=RISING)) == ["ramp_up"]


def test_a_start_is_one_from_nothing_whatever_was_given_while_off() -> None:
    result = one_generator([0.5, 1.75], [False, True], asset=RISING)
    assert broken(result) == ["off_with_output", "ramp_up"]
    # 1.75 MW from off against 1.5 MW, not 1.25 MW from the 0.5 MW that should not have been.
    assert result.verification.violations[1].amount == 0.25


def test_what_ran_before_the_window_stops_from_where_it_was() -> None:
    assert broken(begun_at(1.5, [0.0], FALLING)) == []
    assert broken(begun_at(1.6, [0.0], FALLING)) == ["ramp_down"]


def test_output_before_the_window_is_the_minimum_where_it_is_not_given() -> None:
    assert broken(one_generator([2.5], asset=RISING, initial={"quay-g1": {"on": True}})) == []
    assert broken(one_generator([2.6], asset=RISING, initial={"quay-g1": {"on": True}})) == ["ramp_up"]


def test_the_windows_end_is_no_last_interval() -> None:
    assert broken(begun_at(4.0, [4.0, 4.0], FALLING)) == []


def test_ramps_do_not_bind_into_an_outage_and_bind_out_of_it() -> None:
    outages = [outage("quay-g1", 1, 2, 0.5)]
    assert broken(begun_at(4.0, [4.0, 1.0], FALLING, outages=outages)) == []
    assert broken(begun_at(1.0, [1.0, 2.0, 3.5], RISING, outages=outages)) == []
    assert broken(begun_at(1.0, [1.0, 1.0, 3.0], RISING, outages=outages)) == ["ramp_up"]
    # It may be shut down, or started, into the interval of the outage from and to any output.
    assert broken(begun_at(4.0, [4.0, 0.0], FALLING, outages=outages)) == []
    assert broken(one_generator([0.0, 2.0], asset=RISING, outages=outages)) == []
    assert broken(begun_at(4.0, [0.0], FALLING, outages=[outage("quay-g1", 0, 1)])) == []
    # Out of it a start is a start.
    assert broken(one_generator([0.0, 0.0, 2.0], asset=RISING, outages=outages)) == ["ramp_up"]
