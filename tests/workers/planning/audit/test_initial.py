"""The state at the window's start, and how it widens what may be stored."""

import pytest

from tests.workers.planning.audit.small_jobs import audit, broken, facts, job, one_store, only, store, window


def stored(result: object) -> list[float]:
    values = result.assets[0].stored_mwh  # type: ignore[attr-defined]
    assert values is not None
    return list(values)


def test_a_state_of_charge_is_a_percentage_of_the_capacity() -> None:
    # The denominator is rated capacity, as in Regulation (EU) 2023/1542, Art. 3(27).
    asset = store(min_stored_mwh=1.0, max_stored_mwh=9.0)
    assert stored(one_store([0.0], asset=asset, initial={"quay-b1": {"state_of_charge_percent": 30.0}})) == [3.0]


def test_a_little_more_than_the_capacity_is_taken_to_the_capacity() -> None:
    assert stored(one_store([0.0], initial={"quay-b1": {"stored_mwh": 10.2}})) == [10.0]
    assert broken(one_store([0.0], initial={"quay-b1": {"stored_mwh": 10.2}}, targets={"quay-b1": None})) == []


def test_starting_below_the_floor_an_idle_store_holds_and_a_discharging_one_breaks_it() -> None:
    asset = store(min_stored_mwh=2.0, self_discharge_per_hour=0.1)
    initial = {"quay-b1": {"stored_mwh": 1.0}}
    assert broken(one_store([0.0, 0.0], asset=asset, initial=initial)) == []
    found = only(one_store([0.0, 0.25], asset=asset, initial=initial))
    assert found.rule == "min_stored"
    assert found.amount == pytest.approx(0.25)


def test_the_widened_floor_stays_where_an_idle_store_would_be_even_after_charging() -> None:
    asset = store(min_stored_mwh=2.0)
    initial = {"quay-b1": {"stored_mwh": 1.0}}
    assert broken(one_store([-1.5, 1.5], asset=asset, initial=initial)) == []
    assert broken(one_store([-1.5, 1.6], asset=asset, initial=initial)) == ["min_stored"]


def test_starting_inside_the_range_does_not_widen_it() -> None:
    asset = store(min_stored_mwh=5.0, self_discharge_per_hour=0.1)
    found = only(one_store([0.0], asset=asset))
    assert found.rule == "min_stored"
    assert found.amount == pytest.approx(0.5)


def test_starting_above_the_ceiling_an_idle_store_holds_and_a_charging_one_breaks_it() -> None:
    asset = store(max_stored_mwh=6.0, self_discharge_per_hour=0.1)
    initial = {"quay-b1": {"stored_mwh": 8.0}}
    # 8 MWh fall to 7.2, 6.48, 5.832: the ceiling is 7.2, 6.48, 6.
    assert broken(one_store([0.0, 0.0, -0.168], asset=asset, initial=initial)) == []
    found = only(one_store([0.0, -0.02, 0.0], asset=asset, initial=initial))
    assert found.rule == "max_stored"
    assert found.amount == pytest.approx(0.02)
    assert broken(one_store([0.0, 0.0, -0.178], asset=asset, initial=initial)) == ["max_stored"]


def test_a_store_of_unknown_energy_is_refused_unless_it_may_be_assumed() -> None:
    with pytest.raises(ValueError, match="quay-b1"):
        one_store([0.0], initial={"quay-b1": None})


def test_a_store_assumed_at_its_middle_runs_and_returns_there() -> None:
    asset = store(min_stored_mwh=1.0, max_stored_mwh=8.0)
    unknown = {"initial": {"quay-b1": None}, "targets": {"quay-b1": None}, "missing_initial": "assume_middle"}
    result = one_store([1.0, -1.0], asset=asset, **unknown)
    assert broken(result) == []
    assert stored(result) == [3.5, 4.5]
    assert broken(one_store([1.0, -0.5], asset=asset, **unknown)) == ["final_stored"]


def test_a_store_assumed_at_its_middle_did_before_what_is_said() -> None:
    slow = store(ramp_mw_per_hour=0.5)
    initial = {"quay-b1": {"power_mw": 1.0}}
    assert broken(one_store([1.5], asset=slow, initial=initial, missing_initial="assume_middle")) == []
    assert broken(one_store([0.25], asset=slow, initial=initial, missing_initial="assume_middle")) == ["ramp"]
    steady = store(min_discharge_mw=0.5, min_charge_mw=0.5, min_run_hours=3)
    initial = {"quay-b1": {"power_mw": 1.0, "hours_in_state": 1.0}}
    # An hour before the window and one in it are one less than three.
    found = only(one_store([1.0, 0.0], asset=steady, initial=initial, missing_initial="assume_middle"))
    assert (found.rule, found.amount) == ("min_run", 1.0)


def test_a_store_held_out_stands_idle_with_no_target_and_keeps_losing() -> None:
    asset = store(min_stored_mwh=4.0, self_discharge_per_hour=0.5, standby_load_mw=0.2)
    held = {
        "initial": {"quay-b1": None},
        "targets": {"quay-b1": {"final_stored_mwh": 9.0, "final_value_per_mwh": 50.0}},
        "missing_initial": "hold_out",
    }
    result = one_store([0.0, 0.0], asset=asset, **held)
    assert broken(result) == []
    assert stored(result) == [3.5, 1.75]
    assert result.totals.final_energy_value == 0.0
    assert result.fleet.power_mw == [-0.2, -0.2]


def test_a_store_held_out_may_not_run() -> None:
    asset = store(min_stored_mwh=4.0, ramp_mw_per_hour=0.1)
    found = only(one_store([0.0, -0.5], asset=asset, initial={"quay-b1": None}, missing_initial="hold_out"))
    assert facts(found) == ("hold_out", "/missing_initial", "quay-b1", 1, 0.5, "MW")


def test_commitments_on_a_store_held_out_stay_due() -> None:
    promise = {
        "id": "firm",
        "kind": "hours_at_least",
        "applies_to": {"assets": ["quay-b1"]},
        "threshold": {"mw": 1.0},
        "hours": 1.0,
    }
    document = job(
        [store()], window([0.0]), initial={"quay-b1": None}, missing_initial="hold_out", commitments=[promise]
    )
    found = only(audit(document, {"quay-b1": [0.0]}))
    assert (found.rule, found.amount) == ("hours_at_least", 1.0)
