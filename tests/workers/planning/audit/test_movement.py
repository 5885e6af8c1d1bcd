"""Ramps of a store on its net power."""

import pytest

from tests.workers.planning.audit.small_jobs import broken, one_store, only, store, window

OUT_FROM_ONE_TO_TWO = {
    "asset": "quay-b1",
    "kind": "planned",
    "from": "2027-03-10T01:00:00Z",
    "to": "2027-03-10T02:00:00Z",
}


def test_changing_as_fast_as_the_ramp_allows_holds() -> None:
    assert broken(one_store([1.0, 2.0, 1.0, 0.0, -1.0], asset=store(ramp_mw_per_hour=1.0))) == []


@pytest.mark.parametrize(("power", "excess"), [([1.0, -0.1], 0.1), ([-1.0, 0.5], 0.5), ([0.5, 1.75], 0.25)])
def test_changing_faster_breaks_it(power: list[float], excess: float) -> None:
    found = only(one_store(power, asset=store(ramp_mw_per_hour=1.0)))
    assert (found.rule, found.pointer, found.unit) == ("ramp", "/fleet/assets/0/ramp_mw_per_hour", "MW")
    assert found.amount == pytest.approx(excess)
    assert found.interval_start is not None
    assert found.interval_start.hour == 1


def test_a_ramp_is_per_hour_whatever_the_interval() -> None:
    market = window([0.0, 0.0], interval="PT30M")
    assert broken(one_store([0.5, 1.0], asset=store(ramp_mw_per_hour=1.0), window=market)) == []
    assert broken(one_store([0.5, 1.1], asset=store(ramp_mw_per_hour=1.0), window=market)) == ["ramp"]


def test_the_first_interval_is_held_against_the_windows_start() -> None:
    asset = store(ramp_mw_per_hour=0.5)
    assert broken(one_store([0.5], asset=asset)) == []
    assert broken(one_store([0.6], asset=asset)) == ["ramp"]
    initial = {"quay-b1": {"stored_mwh": 5.0, "power_mw": -1.0}}
    assert broken(one_store([-0.5], asset=asset, initial=initial)) == []
    assert broken(one_store([0.0], asset=asset, initial=initial)) == ["ramp"]


def test_an_outage_may_drop_power_at_once_but_its_end_does_not_bring_it_back_at_once() -> None:
    asset = store(ramp_mw_per_hour=1.0)
    outages = [OUT_FROM_ONE_TO_TWO]
    assert broken(one_store([1.0, 0.0, 1.0], asset=asset, outages=outages)) == []
    slow = store(ramp_mw_per_hour=0.5)
    initial = {"quay-b1": {"stored_mwh": 5.0, "power_mw": 1.0}}
    assert broken(one_store([1.0, 0.0, 0.5], asset=slow, initial=initial, outages=outages)) == []
    found = only(one_store([1.0, 0.0, 0.75], asset=slow, initial=initial, outages=outages))
    assert (found.rule, found.amount) == ("ramp", 0.25)


def test_an_outage_of_one_direction_frees_the_ramp_into_it() -> None:
    asset = store(ramp_mw_per_hour=1.0)
    for left in ({"available_charge_fraction": 0.5}, {"available_discharge_fraction": 0.75}):
        outages = [{**OUT_FROM_ONE_TO_TWO, **left}]
        assert broken(one_store([-1.0, 0.5, 0.0], asset=asset, outages=outages)) == []
    untouched = [{**OUT_FROM_ONE_TO_TWO, "available_fraction": 1.0}]
    assert broken(one_store([-1.0, 0.5, 0.0], asset=asset, outages=untouched)) == ["ramp"]


def test_an_outage_in_the_first_interval_frees_it_from_what_was_before() -> None:
    asset = store(ramp_mw_per_hour=0.5)
    initial = {"quay-b1": {"stored_mwh": 5.0, "power_mw": 2.0}}
    outages = [{**OUT_FROM_ONE_TO_TWO, "from": "2027-03-09T20:00:00Z", "to": "2027-03-10T01:00:00Z"}]
    assert broken(one_store([0.0], asset=asset, initial=initial, outages=outages)) == []
    assert broken(one_store([0.0], asset=asset, initial=initial)) == ["ramp"]
