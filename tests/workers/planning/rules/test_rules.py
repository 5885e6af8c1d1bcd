"""For each rule the smallest case where it just holds, and the same where it just breaks or costs.

Every figure is worked out by hand in the test; the audit has passed every schedule.
"""

from typing import Any

import pytest

from tests.workers.planning.jobs import hours, job, planned, power_of, refused, store

QUAY = {"assets": ["quay-b1"]}


def at(hour: int) -> str:
    return f"2027-02-09T{hour:02d}:00:00Z"


def stored_of(document: dict[str, Any]) -> list[float]:
    stored = planned(document).assets[0].stored_mwh
    assert stored is not None
    return stored


# stored energy


def test_energy_sold_was_bought_with_both_efficiencies() -> None:
    lossy = store(charge_efficiency=0.8, discharge_efficiency=0.5)
    found = planned(job([10.0, 100.0], lossy))
    # 1 MWh bought at 10 stores 0.8, of which 0.4 are sold at 100
    assert power_of(found, "quay-b1") == pytest.approx([-1.0, 0.4])
    assert found.margin == pytest.approx(30.0)


def test_self_discharge_takes_its_share_before_energy_is_sold() -> None:
    leaking = store(self_discharge_per_hour=0.5)
    assert planned(job([10.0, 100.0], leaking)).margin == pytest.approx(-10.0 + 50.0)


def test_a_floor_is_kept_to_the_last_megawatt_hour() -> None:
    assert planned(job([10.0], store(min_stored_mwh=0.75), stored=1.0)).margin == pytest.approx(2.5)


def test_energy_below_the_floor_at_the_start_is_no_fault_but_cannot_be_sold() -> None:
    assert planned(job([10.0, 10.0], store(min_stored_mwh=1.0), stored=0.5, final=0.5)).margin == pytest.approx(0.0)


def test_energy_above_the_ceiling_at_the_start_may_stay_but_not_grow() -> None:
    full = store(max_stored_mwh=1.0)
    assert stored_of(job([-10.0], full, stored=1.5, final=0.0)) == pytest.approx([1.5])


def test_a_floor_that_charging_cannot_reach_in_time_is_refused_with_the_figures() -> None:
    leaking = store(min_stored_mwh=1.5, charge_limit_mw=0.1, self_discharge_per_hour=0.5)
    assert "must hold 1.5 MWh" in refused(job([10.0], leaking, stored=2.0)).summary


# power limits, outages, minimum powers, modes


def test_an_outage_scales_the_limits_of_the_intervals_it_touches() -> None:
    outage = {"asset": "quay-b1", "kind": "forced", "from": "2027-02-09T01:30:00Z", "to": at(2)}
    found = planned(job([10.0, 99.0, 20.0], store(), stored=2.0, outages=[outage | {"available_fraction": 0.25}]))
    assert power_of(found, "quay-b1") == pytest.approx([0.75, 0.25, 1.0])


@pytest.mark.parametrize(("least", "margin"), [(0.5, 5.0), (0.51, 0.0)])
def test_a_minimum_power_above_what_is_stored_leaves_the_store_idle(least: float, margin: float) -> None:
    assert planned(job([10.0], store(min_discharge_mw=least), stored=0.5)).margin == pytest.approx(margin)


@pytest.mark.parametrize(("fraction", "margin"), [(0.5, 5.0), (0.49, 0.0)])
def test_a_trip_below_the_minimum_power_closes_the_direction(fraction: float, margin: float) -> None:
    outage = {"asset": "quay-b1", "kind": "forced", "from": at(0), "to": at(1), "available_fraction": fraction}
    document = job([10.0], store(min_discharge_mw=0.5), stored=1.0, outages=[outage])
    assert planned(document).margin == pytest.approx(margin)


# ramps


def test_net_power_rises_by_the_ramp_and_no_more() -> None:
    found = planned(job([10.0, 10.0], store(ramp_mw_per_hour=0.25), stored=2.0))
    assert power_of(found, "quay-b1") == pytest.approx([0.25, 0.5])


def test_a_ramp_does_not_bind_into_an_outage_but_binds_out_of_it() -> None:
    outage = {"asset": "quay-b1", "kind": "forced", "from": at(1), "to": at(2), "available_fraction": 0.0}
    steady = store(ramp_mw_per_hour=0.25, energy_capacity_mwh=8.0)
    document = job([50.0, 50.0, 50.0], steady, stored=8.0, outages=[outage])
    document["initial"]["quay-b1"]["power_mw"] = 1.0
    assert power_of(planned(document), "quay-b1") == pytest.approx([1.0, 0.0, 0.25])


# runs, rests, starts


def runner(**changes: Any) -> dict[str, Any]:
    return store(**({"min_discharge_mw": 0.5, "min_charge_mw": 0.5, "energy_capacity_mwh": 8.0} | changes))


@pytest.mark.parametrize(("least", "margin"), [(1, 100.0), (2, 100.0 - 0.5 * 10)])
def test_a_run_lasts_its_least_time(least: int, margin: float) -> None:
    # One good hour amid bad ones: a second hour at minimum power costs 0.5 MWh at a price of -10.
    document = job([-10.0, 100.0, -10.0, -10.0], runner(min_run_hours=least, charge_limit_mw=0.0, min_charge_mw=0.0))
    document["initial"] = {"quay-b1": {"stored_mwh": 8.0}}
    assert planned(document).margin == pytest.approx(margin)


def test_a_run_cut_by_the_end_of_the_window_is_no_fault() -> None:
    document = job([-10.0, -10.0, 100.0], runner(min_run_hours=3, charge_limit_mw=0.0, min_charge_mw=0.0), stored=8.0)
    assert planned(document).margin == pytest.approx(100.0)


def test_a_run_under_way_is_kept_up_until_it_has_lasted() -> None:
    document = job([-10.0] * 3, runner(min_run_hours=3, charge_limit_mw=0.0, min_charge_mw=0.0), stored=8.0)
    document["initial"]["quay-b1"] |= {"power_mw": 0.5, "hours_in_state": 1}
    assert power_of(planned(document), "quay-b1") == pytest.approx([0.5, 0.5, 0.0])


def test_a_run_of_one_interval_that_is_under_way_is_finished() -> None:
    document = job([-10.0] * 2, runner(min_run_hours=1, charge_limit_mw=0.0, min_charge_mw=0.0), stored=8.0)
    document["initial"]["quay-b1"] |= {"power_mw": 0.5, "hours_in_state": 0.5}
    assert power_of(planned(document), "quay-b1") == pytest.approx([0.5, 0.0])


def test_a_trip_ends_a_run_before_its_least_time() -> None:
    outage = {"asset": "quay-b1", "kind": "forced", "from": at(1), "to": at(2), "available_fraction": 0.0}
    steady = runner(min_run_hours=3, charge_limit_mw=0.0, min_charge_mw=0.0)
    document = job([100.0, 100.0, -10.0, -10.0], steady, stored=8.0, outages=[outage])
    assert power_of(planned(document), "quay-b1") == pytest.approx([1.0, 0.0, 0.0, 0.0])


@pytest.mark.parametrize(("least", "powers"), [(1, [1.0, 0.0, 1.0]), (2, [1.0, 0.0, 0.0])])
def test_a_rest_lasts_its_least_time(least: int, powers: list[float]) -> None:
    outage = {"asset": "quay-b1", "kind": "planned", "from": at(1), "to": at(2), "available_fraction": 0.0}
    resting = runner(min_rest_hours=least, charge_limit_mw=0.0, min_charge_mw=0.0)
    assert power_of(planned(job([30.0, 20.0, 10.0], resting, stored=8.0, outages=[outage])), "quay-b1") == powers


def test_a_change_of_direction_waits_for_the_rest() -> None:
    turning = runner(min_rest_hours=1)
    assert power_of(planned(job([10.0, 100.0], turning)), "quay-b1") == [0.0, 0.0]
    assert power_of(planned(job([10.0, 50.0, 100.0], turning)), "quay-b1") == pytest.approx([-1.0, 0.0, 1.0])


def test_a_rest_that_began_before_the_window_is_finished_first() -> None:
    document = job([50.0, 40.0], runner(min_rest_hours=3), stored=8.0)
    document["initial"]["quay-b1"] |= {"power_mw": 0.0, "hours_in_state": 2}
    assert power_of(planned(document), "quay-b1") == pytest.approx([0.0, 1.0])


@pytest.mark.parametrize(("starts", "margin"), [(1, 100.0), (2, 190.0)])
def test_a_day_has_only_so_many_starts(starts: int, margin: float) -> None:
    limited = runner(max_starts_per_day=starts, charge_limit_mw=0.0, min_charge_mw=0.0)
    assert planned(job([90.0, -200.0, 100.0], limited, stored=8.0)).margin == pytest.approx(margin)


def test_starts_of_earlier_that_day_count_and_a_run_under_way_is_none() -> None:
    limited = runner(max_starts_per_day=1, charge_limit_mw=0.0, min_charge_mw=0.0)
    counted = {"assets": {"quay-b1": {"starts": 1}}}
    document = job([90.0, 90.0], limited, stored=8.0, counted_before=counted)
    assert planned(document).margin == pytest.approx(0.0)
    document["initial"]["quay-b1"]["power_mw"] = 1.0
    assert planned(document).margin == pytest.approx(180.0)


# cycles, final energy, wear


@pytest.mark.parametrize(("before", "margin"), [(0.0, 100.0), (0.5, 50.0), (2.0, 0.0)])
def test_a_day_discharges_its_cycles_less_what_it_had(before: float, margin: float) -> None:
    counted = {"assets": {"quay-b1": {"discharged_mwh": before}}}
    document = job([100.0, 100.0], store(max_cycles_per_day=0.5), stored=2.0, counted_before=counted)
    assert planned(document).margin == pytest.approx(margin)


def test_the_next_local_day_has_cycles_of_its_own() -> None:
    # The window begins at 23:00 in Lisbon (UTC in winter): one hour of the first day, one of the next.
    window = {"start": "2027-02-09T23:00:00Z", "timezone": "Europe/Lisbon"}
    document = job([100.0, 100.0], store(max_cycles_per_day=0.25), stored=2.0, window=window)
    assert planned(document).margin == pytest.approx(100.0)
    assert planned(document | {"window": document["window"] | {"timezone": "Asia/Tokyo"}}).margin == pytest.approx(50.0)


def test_the_final_target_is_kept_and_what_lies_above_it_has_its_value() -> None:
    document = job([50.0, 50.0], store(), stored=2.0, final=1.5)
    assert planned(document).margin == pytest.approx(25.0)
    document["targets"]["quay-b1"]["final_value_per_mwh"] = 60.0
    found = planned(document)
    assert found.margin == pytest.approx(30.0)
    assert found.totals.final_energy_value == pytest.approx(30.0)


def test_a_final_target_out_of_reach_is_refused_by_name() -> None:
    diagnosis = refused(job([50.0], store(), stored=0.0, final=1.25))
    assert diagnosis.conflicts[0].members[0].pointer == "/targets/quay-b1/final_stored_mwh"
    assert "1.25 MWh" in diagnosis.summary
    assert "at most 1 MWh" in diagnosis.summary


def test_wear_is_paid_per_megawatt_hour_discharged() -> None:
    assert planned(job([10.0, 30.0], store(wear_cost_per_mwh=19.0))).margin == pytest.approx(1.0)
    assert planned(job([10.0, 30.0], store(wear_cost_per_mwh=21.0))).margin == pytest.approx(0.0)


# connection, settlement, fees, peak

SITE = {"id": "quay"}


def on_site(asset: str = "quay-b1", **changes: Any) -> dict[str, Any]:
    return store(asset, site="quay", **changes)


def test_a_site_limit_holds_the_sum_of_its_stores() -> None:
    sites = [SITE | {"export_limit_mw": 1.5}]
    document = job([10.0], on_site(), on_site("quay-b2"), stored=2.0, sites=sites)
    assert planned(document).sites[0].power_mw == pytest.approx([1.5])
    document["limits"] = {"quay": {"export_limit_mw": [0.5]}}
    assert planned(document).sites[0].power_mw == pytest.approx([0.5])


def test_standby_load_takes_its_part_of_the_import_limit() -> None:
    sites = [SITE | {"import_limit_mw": 1.0}]
    found = planned(job([-10.0], on_site(standby_load_mw=0.25), sites=sites))
    assert power_of(found, "quay-b1") == pytest.approx([-0.75])
    assert found.margin == pytest.approx(10.0)


def test_a_load_beyond_the_import_limit_is_refused_with_the_figures() -> None:
    load = {"id": "quay-crane", "kind": "fixed_load", "site": "quay"}
    sites = [SITE | {"import_limit_mw": 1.0}]
    document = job([10.0], on_site(), load, stored=0.5, sites=sites, forecasts={"quay-crane": 2.5})
    assert "2.5 MW" in refused(document).summary
    document["forecasts"]["quay-crane"] = 1.5
    assert power_of(planned(document), "quay-b1") == pytest.approx([0.5])


def test_a_fleet_limit_holds_all_meters() -> None:
    document = job([10.0], store(), store("mole-b1"), stored=2.0, fleet={"export_limit_mw": 1.25})
    assert planned(document).fleet.power_mw == pytest.approx([1.25])


def test_buying_and_selling_have_their_own_prices_around_the_position() -> None:
    window = {"price_per_mwh": None, "buy_price_per_mwh": [40.0, 40.0], "sell_price_per_mwh": [30.0, 39.0]}
    document = job([], store(), stored=0.0, window=window)
    assert planned(document).margin == pytest.approx(0.0)
    # Sold ahead: 1 MW in the second hour. Delivering from the store saves buying back at 40; filling it costs 40.
    found = planned(document | {"positions": {"quay-b1": [0.0, 1.0]}})
    assert found.totals.purchases == pytest.approx(40.0)
    assert found.margin == pytest.approx(-40.0)


def test_selling_above_buying_does_not_trade_with_itself() -> None:
    # Not convex: without its binary a meter would sell and buy at once for 10 per MWh.
    window = {"price_per_mwh": None, "buy_price_per_mwh": [40.0], "sell_price_per_mwh": [50.0]}
    assert planned(job([], store(), store("mole-b1"), stored=0.0, window=window)).margin == pytest.approx(0.0)
    assert planned(job([], store(), stored=1.0, window=window)).margin == pytest.approx(50.0)


def test_settling_the_fleet_as_one_nets_its_meters() -> None:
    window = {"price_per_mwh": None, "buy_price_per_mwh": [40.0], "sell_price_per_mwh": [10.0]}
    load = {"id": "mill", "kind": "fixed_load"}
    document = job([], store(), load, stored=1.0, window=window, forecasts={"mill": 1.0})
    assert planned(document).margin == pytest.approx(10.0 - 40.0)
    document["window"]["settled_at"] = "fleet"
    assert planned(document).margin == pytest.approx(0.0)


def test_fees_follow_what_the_site_imports_and_exports() -> None:
    sites = [SITE | {"import_fee_per_mwh": 5.0, "export_fee_per_mwh": 4.0}]
    assert planned(job([10.0, 20.0], on_site(), sites=sites)).margin == pytest.approx(1.0)
    found = planned(job([10.0, 18.0], on_site(), sites=sites))
    assert found.margin == pytest.approx(0.0)


def test_fees_turn_at_zero_and_the_settlement_at_the_position() -> None:
    sites = [SITE | {"export_fee_per_mwh": 4.0}]
    document = job([3.0], on_site(), stored=1.0, sites=sites, positions={"quay": [1.0]})
    found = planned(document)
    # Delivering costs 4 in fees, buying the position back costs 3.
    assert found.margin == pytest.approx(-3.0)


def test_a_peak_is_paid_above_what_the_month_already_had() -> None:
    sites = [SITE | {"peak_import_charge_per_mw": 30.0}]
    document = job([10.0, 50.0], on_site(), sites=sites)
    assert planned(document).margin == pytest.approx(10.0)
    document["counted_before"] = {"sites": {"quay": {"peak_import_mw": 1.0}}}
    assert planned(document).margin == pytest.approx(40.0)


# hours at least


def test_a_commitment_is_met_exactly_and_costs_what_it_displaces() -> None:
    # 1 MWh earns 50 in hour 2; half of it has to go in hour 1 at 10.
    promise = hours(QUAY, 1, 0.5, to=at(1))
    found = planned(job([10.0, 50.0], store(charge_limit_mw=0.0), stored=1.0, commitments=[promise]))
    assert power_of(found, "quay-b1") == pytest.approx([0.5, 0.5])
    assert (found.commitments[0].required_hours, found.commitments[0].delivered_hours) == (1.0, 1.0)
    assert found.commitments[0].met


def test_headroom_is_delivered_but_counted_at_the_threshold() -> None:
    promise = hours(QUAY, 1, 0.5, headroom_mw=0.25, to=at(1))
    found = planned(job([10.0, 50.0], store(), stored=1.0, commitments=[promise]))
    assert power_of(found, "quay-b1")[0] == pytest.approx(0.75)


@pytest.mark.parametrize(("price", "met"), [(19.0, False), (21.0, True)])
def test_a_priced_commitment_is_met_when_that_is_cheaper(price: float, met: bool) -> None:
    # Meeting it displaces 0.5 MWh from 50 to 10: 20.
    promise = hours(QUAY, 1, 0.5, shortfall_price_per_hour=price, to=at(1))
    found = planned(job([10.0, 50.0], store(charge_limit_mw=0.0), stored=1.0, commitments=[promise]))
    assert found.commitments[0].met is met
    assert found.totals.shortfall_cost == pytest.approx(0.0 if met else price)


def test_hours_counted_before_are_owed_no_more() -> None:
    promise = hours(QUAY, 3, 0.5)
    document = job([10.0, 10.0], store(charge_limit_mw=0.0), stored=1.0, commitments=[promise])
    assert "at most 2 h" in refused(document).summary
    document["counted_before"] = {"commitments": {"evening": {"quay-b1": 1.0}}}
    assert planned(document).commitments[0].delivered_hours == pytest.approx(3.0)


@pytest.mark.parametrize(("block", "powers"), [(0, [0.5, 0.0, 0.5]), (2, [0.5, 0.5, 0.0])])
def test_a_block_has_to_be_unbroken(block: int, powers: list[float]) -> None:
    promise = hours(QUAY, 2, 0.5, min_block_hours=block)
    document = job([30.0, 10.0, 20.0], store(discharge_limit_mw=0.5, charge_limit_mw=0.0), stored=1.0)
    assert power_of(planned(document | {"commitments": [promise]}), "quay-b1") == pytest.approx(powers)


def test_an_excused_interval_counts_and_joins_blocks() -> None:
    outage = {"asset": "quay-b1", "kind": "forced", "from": at(1), "to": at(2), "available_fraction": 0.0}
    promise = hours(QUAY, 3, 0.5, min_block_hours=3)
    document = job([10.0] * 3, store(), stored=2.0, outages=[outage], commitments=[promise])
    assert "at most 0 h in unbroken stretches of 3 h" in refused(document).summary
    promise["excused"] = [{"from": at(1), "to": at(2)}]
    assert planned(document).commitments[0].delivered_hours == pytest.approx(3.0)


def test_hours_of_charging_count_in_their_direction() -> None:
    promise = hours(QUAY, 2, 0.5, direction="charge")
    found = planned(job([50.0, 10.0, 60.0], store(), commitments=[promise]))
    assert sum(power <= -0.5 for power in power_of(found, "quay-b1")) == 2


def test_each_day_owes_its_own_hours_within_its_evening() -> None:
    promise = hours(QUAY, 1, 0.5, each_day=True, between=["23:00", "01:00"])
    window = {"start": "2027-02-09T22:00:00Z"}
    document = job([90.0, 10.0, 20.0, 5.0], store(), stored=0.5, commitments=[promise], window=window)
    found = planned(document)
    assert [row.day for row in found.commitments] == ["2027-02-09"]
    assert power_of(found, "quay-b1")[2] >= 0.5


@pytest.mark.parametrize("whom", [{"group": ["quay-b1", "quay-b2"]}, {"site": "quay"}, {"fleet": True}])
def test_a_sum_is_met_by_several_stores_net_of_what_their_meter_draws(whom: dict[str, Any]) -> None:
    # 1.5 MW of the two together, of which each draws 0.25 MW of standby: 2 MW at the terminals, all they have.
    pair = [on_site(standby_load_mw=0.25), on_site("quay-b2", standby_load_mw=0.25)]
    promise = hours(whom, 1, 1.5)
    document = job([10.0], *pair, stored=1.0, sites=[SITE], commitments=[promise])
    assert planned(document).sites[0].power_mw == pytest.approx([1.5])
    promise["threshold"] = {"mw": 1.51}
    assert "at most 0 h" in refused(document).summary


def test_a_sum_counts_charging_against_it() -> None:
    # One store has energy, the other must end full: in the committed hour it may not charge.
    pair = [on_site(charge_limit_mw=0.0), on_site("quay-b2", discharge_limit_mw=0.0)]
    promise = hours({"site": "quay"}, 1, 1.0, to=at(1))
    document = job([10.0, 30.0], *pair, sites=[SITE], commitments=[promise])
    document["initial"] = {"quay-b1": {"stored_mwh": 1.0}, "quay-b2": {"stored_mwh": 0.0}}
    document["targets"] = {"quay-b1": {"final_stored_mwh": 0.0}, "quay-b2": {"final_stored_mwh": 1.0}}
    found = planned(document)
    assert power_of(found, "quay-b2") == pytest.approx([0.0, -1.0])
    document["targets"]["quay-b2"]["final_stored_mwh"] = 1.5
    refused(document)
