"""Power limits, stored energy, final target and cycles of one store; figures worked out by hand."""

from math import sqrt

import pytest

from tests.workers.planning.audit.small_jobs import Document, broken, facts, one_store, only, store, window


def test_discharging_at_the_limit_holds() -> None:
    assert broken(one_store([2.0])) == []


def test_discharging_above_the_limit_breaks_it() -> None:
    found = only(one_store([0.0, 2.00001]))
    assert (found.rule, found.pointer, found.asset, found.unit) == (
        "discharge_limit",
        "/fleet/assets/0/discharge_limit_mw",
        "quay-b1",
        "MW",
    )
    assert found.amount == pytest.approx(1e-5, rel=1e-6)
    assert found.interval_start is not None
    assert found.interval_start.isoformat() == "2027-03-10T01:00:00+00:00"
    assert "quay-b1 discharges 2.00001 MW" in found.text
    assert "limit of 2 MW" in found.text


def test_charging_at_the_limit_holds() -> None:
    assert broken(one_store([-2.0])) == []


def test_charging_above_the_limit_breaks_it() -> None:
    found = only(one_store([-2.5]))
    assert (found.rule, found.pointer, found.amount) == ("charge_limit", "/fleet/assets/0/charge_limit_mw", 0.5)


def test_a_breach_within_a_millionth_of_the_limit_is_let_pass_and_remembered() -> None:
    result = one_store([2.0000015])
    assert broken(result) == []
    assert result.verification.largest_residual == pytest.approx(1.5e-6)


def test_a_clean_schedule_leaves_no_residual() -> None:
    result = one_store([1.0, -1.0])
    assert result.verification.largest_residual == 0.0
    assert result.verification.checks > 0


@pytest.mark.parametrize("power", [0.5, 0.0, 1e-6, -0.25, -1e-6])
def test_running_at_the_minimum_power_or_idling_holds(power: float) -> None:
    assert broken(one_store([power], asset=store(min_discharge_mw=0.5, min_charge_mw=0.25))) == []


def test_running_below_the_minimum_power_breaks_it() -> None:
    asset = store(min_discharge_mw=0.5, min_charge_mw=0.25)
    found = only(one_store([0.4], asset=asset))
    assert (found.rule, found.pointer) == ("min_discharge", "/fleet/assets/0/min_discharge_mw")
    assert found.amount == pytest.approx(0.1)
    found = only(one_store([-0.2], asset=asset))
    assert (found.rule, found.pointer) == ("min_charge", "/fleet/assets/0/min_charge_mw")
    assert found.amount == pytest.approx(0.05)


def test_a_store_may_have_a_minimum_power_in_one_direction_alone() -> None:
    assert broken(one_store([0.1, -0.25], asset=store(min_charge_mw=0.25))) == []
    assert broken(one_store([0.1, -0.2], asset=store(min_charge_mw=0.25))) == ["min_charge"]
    assert broken(one_store([0.5, -0.1], asset=store(min_discharge_mw=0.5))) == []


@pytest.mark.parametrize(
    ("power", "members", "rule", "where", "hour", "amount", "unit"),
    [
        ([0.5, 0.25], {"min_discharge_mw": 0.5}, "min_discharge", "min_discharge_mw", 1, 0.25, "MW"),
        ([-0.5, -0.25], {"min_charge_mw": 0.5}, "min_charge", "min_charge_mw", 1, 0.25, "MW"),
        # 5 MWh at the start, an hour at each power.
        ([1.0, 1.25], {"min_stored_mwh": 3.0}, "min_stored", "min_stored_mwh", 1, 0.25, "MWh"),
        ([-1.0, -1.25], {"max_stored_mwh": 7.0}, "max_stored", "max_stored_mwh", 1, 0.25, "MWh"),
        # Of a day's 2.5 MWh too many go out by its end; the breach is the day's and stands at its first interval.
        ([1.0, 1.75], {"max_cycles_per_day": 0.25}, "max_cycles_per_day", "max_cycles_per_day", 0, 0.25, "MWh"),
    ],
)
def test_a_breach_names_the_store_its_interval_and_how_much_of_what(
    power: list[float], members: Document, rule: str, where: str, hour: int, amount: float, unit: str
) -> None:
    found = only(one_store(power, asset=store(**members)))
    assert facts(found) == (rule, f"/fleet/assets/0/{where}", "quay-b1", hour, amount, unit)


def test_stored_energy_follows_power_efficiencies_and_self_discharge() -> None:
    asset = store(charge_efficiency=0.8, discharge_efficiency=0.5, self_discharge_per_hour=0.1)
    stored = one_store([-2.0, 1.0, 0.0], asset=asset).assets[0].stored_mwh
    # 5 * 0.9 + 2 * 0.8 = 6.1; 6.1 * 0.9 - 1 / 0.5 = 3.49; 3.49 * 0.9 = 3.141
    assert stored == pytest.approx([6.1, 3.49, 3.141])


def test_half_an_hour_loses_the_square_root_of_what_an_hour_keeps() -> None:
    asset = store(charge_efficiency=0.8, self_discharge_per_hour=0.19)
    stored = one_store([-2.0], asset=asset, window=window([0.0], interval="PT30M")).assets[0].stored_mwh
    assert stored == pytest.approx([5.0 * sqrt(0.81) + 0.5 * 2.0 * 0.8])


def test_emptying_to_the_floor_holds() -> None:
    assert broken(one_store([2.0, 2.0], asset=store(min_stored_mwh=1.0))) == []


def test_emptying_below_the_floor_is_reported_not_clipped() -> None:
    result = one_store([2.0, 2.0, 0.1], asset=store(min_stored_mwh=1.0))
    found = only(result)
    assert (found.rule, found.pointer, found.unit) == ("min_stored", "/fleet/assets/0/min_stored_mwh", "MWh")
    assert found.amount == pytest.approx(0.1)
    assert result.assets[0].stored_mwh == pytest.approx([3.0, 1.0, 0.9])
    assert "at 2027-03-10 03:00+00:00" in found.text


def test_filling_to_the_ceiling_holds() -> None:
    assert broken(one_store([-1.0], asset=store(max_stored_mwh=6.0))) == []
    assert broken(one_store([-2.0, -2.0, -1.0])) == []


def test_overfilling_is_reported_not_clipped() -> None:
    found = only(one_store([-1.1], asset=store(max_stored_mwh=6.0)))
    assert (found.rule, found.pointer) == ("max_stored", "/fleet/assets/0/max_stored_mwh")
    assert found.amount == pytest.approx(0.1)
    result = one_store([-2.0, -2.0, -1.5])
    assert broken(result) == ["max_stored"]
    assert result.assets[0].stored_mwh == [7.0, 9.0, 10.5]


def test_ending_at_the_final_target_holds_and_below_it_breaks_it() -> None:
    targets = {"quay-b1": {"final_stored_mwh": 4.0}}
    assert broken(one_store([1.0], targets=targets)) == []
    found = only(one_store([1.25, 0.0], targets=targets))
    assert facts(found) == ("final_stored", "/targets/quay-b1/final_stored_mwh", "quay-b1", 1, 0.25, "MWh")


def test_without_a_target_a_store_ends_with_what_it_started_with() -> None:
    assert broken(one_store([1.0, -1.0], targets={"quay-b1": None})) == []
    found = only(one_store([1.0, -0.9], targets={"quay-b1": {"final_value_per_mwh": 10.0}}))
    assert found.rule == "final_stored"
    assert found.amount == pytest.approx(0.1)


def test_without_a_target_a_lossy_store_need_not_make_up_for_its_losses() -> None:
    asset = store(self_discharge_per_hour=0.1)
    assert broken(one_store([0.0, 0.0], asset=asset, targets={"quay-b1": None})) == []
    found = only(one_store([0.0, 0.01], asset=asset, targets={"quay-b1": None}))
    assert found.rule == "final_stored"
    assert found.amount == pytest.approx(0.01)


def test_discharging_up_to_the_days_cycles_holds() -> None:
    asset = store(max_cycles_per_day=0.25)
    assert broken(one_store([1.5, 1.0, -2.0], asset=asset)) == []


def test_discharging_more_than_the_days_cycles_breaks_it() -> None:
    found = only(one_store([1.5, -2.0, 1.5], asset=store(max_cycles_per_day=0.25)))
    assert (found.rule, found.pointer) == ("max_cycles_per_day", "/fleet/assets/0/max_cycles_per_day")
    assert found.amount == pytest.approx(0.5)
    assert found.unit == "MWh"


def test_each_local_day_has_its_own_cycles_and_the_first_one_what_was_counted_before() -> None:
    market = window([0.0, 0.0], start="2027-03-10T22:00:00+00:00", timezone="Europe/Berlin")
    asset = store(max_cycles_per_day=0.2)
    # 22:00Z is 23:00 in Berlin: the first interval belongs to the 10th, the second to the 11th.
    before = {"assets": {"quay-b1": {"discharged_mwh": 0.5}}}
    assert broken(one_store([1.5, 2.0], asset=asset, window=market, counted_before=before)) == []
    found = only(one_store([1.75, 2.0], asset=asset, window=market, counted_before=before))
    assert found.rule == "max_cycles_per_day"
    assert found.amount == pytest.approx(0.25)
    assert "2027-03-10" in found.text


def test_a_day_that_had_more_cycles_than_it_may_has_none_left_and_owes_none() -> None:
    asset = store(max_cycles_per_day=0.2)
    before = {"assets": {"quay-b1": {"discharged_mwh": 50.0}}}
    assert broken(one_store([0.0, -1.0], asset=asset, counted_before=before)) == []
    found = only(one_store([0.25, 0.0], asset=asset, counted_before=before))
    assert found.rule == "max_cycles_per_day"
    assert found.amount == pytest.approx(0.25)


def test_energy_out_over_energy_in_of_a_cyclic_schedule_is_the_product_of_both_efficiencies() -> None:
    # Round-trip efficiency as IEC 62933-2-1:2017 defines it (from memory): energy discharged over energy absorbed at
    # the point of connection, over a cycle that ends at the initial state of charge.
    asset = store(charge_efficiency=0.9, discharge_efficiency=0.8)
    targets = {"quay-b1": {"final_stored_mwh": 5.0}}
    energy_in = 2.0 + 1.0
    cyclic = one_store([-2.0, -1.0, 0.9 * 0.8 * energy_in - 1.0, 1.0], asset=asset, targets=targets)
    assert broken(cyclic) == []
    assert cyclic.assets[0].stored_mwh is not None
    assert cyclic.assets[0].stored_mwh[-1] == pytest.approx(5.0)
    assert broken(one_store([-2.0, -1.0, 0.9 * 0.8 * energy_in - 0.999, 1.0], asset=asset, targets=targets)) == [
        "final_stored"
    ]
