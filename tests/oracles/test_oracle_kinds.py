"""Check the oracle's renewables, loads, reserve and lots by the smallest cases, each worked out by hand."""

from __future__ import annotations

import pytest

from tests.oracles.plain_jobs import (
    Document,
    at,
    best,
    generator,
    is_impossible,
    job,
    margin_of,
    owed,
    product,
    store,
)

WIND: Document = {"id": "fen-w1", "kind": "renewable"}
BASE: Document = {"id": "fen-base", "kind": "fixed_load"}
ISLAND: Document = {"id": "skerry", "export_limit_mw": 0.0, "import_limit_mw": 0.0}


def pumps(**changes: object) -> Document:
    """Return a flexible load of up to 1 MW."""
    return {"id": "fen-p1", "kind": "flexible_load", "draw_limit_mw": 1.0} | changes


def test_renewable_is_curtailed_at_negative_prices_where_it_can_be() -> None:
    forecasts = {"fen-w1": [2.0, 3.0]}
    assert margin_of(job([10.0, -10.0], WIND, forecasts=forecasts)) == pytest.approx(20.0)
    assert margin_of(job([10.0, -10.0], WIND | {"curtailable": False}, forecasts=forecasts)) == pytest.approx(-10.0)


def test_renewable_energy_costs_and_an_outage_scales_its_forecast() -> None:
    dear = WIND | {"cost_per_mwh": 4.0, "curtailable": False}
    outage = {"asset": "fen-w1", "kind": "planned", "from": at(1), "to": None, "available_fraction": 0.25}
    request = job([10.0, 10.0], dear, forecasts={"fen-w1": 2.0}, outages=[outage])
    assert margin_of(request) == pytest.approx(6.0 * 2.0 + 6.0 * 0.5)


def test_flexible_load_draws_its_need_in_the_cheapest_hours_within_it() -> None:
    needs = {"fen-p1": [{"energy_mwh": 1.5, "from": at(1), "to": at(4)}]}
    answer = best(job([1.0, 30.0, 20.0, 40.0, 1.0], pumps(), energy_needs=needs))
    assert answer.powers["fen-p1"] == pytest.approx([0.0, -0.5, -1.0, 0.0, 0.0])
    assert answer.margin == pytest.approx(-35.0)


def test_need_that_does_not_fit_its_span_is_impossible() -> None:
    assert margin_of(job([1.0] * 3, pumps(), energy_needs={"fen-p1": [{"energy_mwh": 3.0}]})) == pytest.approx(-3.0)
    needs = [{"energy_mwh": 1.0, "to": at(1)}, {"energy_mwh": 2.1, "from": at(1)}]
    assert is_impossible(job([1.0] * 3, pumps(), energy_needs={"fen-p1": needs}))


def test_negative_price_does_not_make_a_load_draw_more_than_it_needs() -> None:
    assert margin_of(job([-50.0, 5.0], pumps(), energy_needs={"fen-p1": [{"energy_mwh": 0.4}]})) == pytest.approx(20.0)
    assert margin_of(job([-50.0, 5.0], pumps())) == pytest.approx(0.0)


def test_load_that_may_not_be_interrupted_draws_in_one_stretch() -> None:
    needs = {"fen-p1": [{"energy_mwh": 1.2}]}
    prices = [10.0, 90.0, 10.0, 30.0]
    # Apart: 1 MWh and 0.2 MWh at 10. In one stretch of at least 0.2 MW: 1 MWh at 10 and 0.2 MWh at 30.
    assert margin_of(job(prices, pumps(min_draw_mw=0.2), energy_needs=needs)) == pytest.approx(-12.0)
    steady = pumps(min_draw_mw=0.2, interruptible=False)
    assert margin_of(job(prices, steady, energy_needs=needs)) == pytest.approx(-16.0)


def test_load_draws_its_minimum_or_nothing_and_nothing_where_less_is_left() -> None:
    needs = {"fen-p1": [{"energy_mwh": 1.2}]}
    # 1 MWh at 10 would leave 0.2 MWh, less than the minimum: 0.7 at 10 and 0.5 at 30.
    assert margin_of(job([10.0, 30.0], pumps(min_draw_mw=0.5), energy_needs=needs)) == pytest.approx(-22.0)
    outage = {"asset": "fen-p1", "kind": "forced", "from": at(0), "to": at(1), "available_fraction": 0.4}
    low = {"fen-p1": [{"energy_mwh": 0.6}]}
    assert margin_of(job([10.0, 30.0], pumps(min_draw_mw=0.5), energy_needs=low, outages=[outage])) == pytest.approx(
        -18.0
    )


def test_site_sells_whole_lots_only() -> None:
    sites = [{"id": "fen", "lot_mw": 0.3}]
    assert margin_of(job([10.0], store(site="fen"), stored=2.0, sites=sites)) == pytest.approx(9.0)
    assert margin_of(job([10.0], store(), stored=2.0, fleet={"lot_mw": 0.4})) == pytest.approx(8.0)
    fixed: Document = {"forecasts": {"fen-base": 0.5}, "sites": sites}
    assert is_impossible(job([10.0], BASE | {"site": "fen"}, **fixed))
    # The store makes 0.5 MW of load up to no lot at all, or gives 0.8 MW: a lot into the grid.
    assert margin_of(job([10.0], BASE | {"site": "fen"}, store(site="fen"), stored=2.0, **fixed)) == pytest.approx(3.0)


def test_store_holds_upward_reserve_within_its_power_and_its_energy() -> None:
    # 0.4 MWh inside give 0.32 MWh at the terminals: 0.64 MW for half an hour.
    lossy = store(discharge_efficiency=0.8)
    assert margin_of(job([0.0], lossy, stored=0.4, products=[product("up")])) == pytest.approx(6.4)
    # Idle, it can turn up by its whole discharge limit; charging at 1 MW by 2 MW, which needs 1 MWh at the start.
    assert margin_of(job([0.0], store(), stored=1.0, products=[product("up")])) == pytest.approx(20.0)
    assert margin_of(job([0.0], store(charge_limit_mw=0.0), stored=1.0, products=[product("up")])) == pytest.approx(
        10.0
    )


def test_store_holds_downward_reserve_within_its_room() -> None:
    lossy = store(charge_efficiency=0.5, discharge_limit_mw=0.0)
    # 0.2 MWh of room inside take 0.4 MWh from the grid: 0.8 MW for half an hour.
    assert margin_of(job([0.0], lossy, stored=1.8, products=[product("down")])) == pytest.approx(8.0)
    assert margin_of(job([0.0], lossy, stored=2.0, products=[product("down")])) == pytest.approx(0.0)


def test_symmetric_reserve_takes_room_both_ways_beside_other_products() -> None:
    products = [product("symmetric", 10.0), product("up", 4.0), product("down", 3.0)]
    # 1 MW both ways, or 1 MW up and 1 MW down for 7: symmetric pays more, and nothing is left for the others.
    assert margin_of(job([0.0], store(), stored=1.0, products=products)) == pytest.approx(10.0)


def test_reserve_must_be_covered_at_the_end_of_the_interval_too() -> None:
    # Selling all leaves nothing to sustain: 1 MWh at 10 against 0.5 MWh at 10 and 1 MW of reserve at 6, less power.
    request = job([10.0], store(discharge_limit_mw=2.0, charge_limit_mw=0.0), stored=1.0, products=[product("up", 6.0)])
    # p + r <= 2, r/2 <= 1 - p: 10 p + 6 r is best at p = 0, r = 2 with 12.
    assert margin_of(request) == pytest.approx(12.0)


def test_store_above_its_maximum_that_loses_energy_holds_nothing_downwards_until_there_is_room() -> None:
    leaky = store(self_discharge_per_hour=0.5, max_stored_mwh=1.0, discharge_limit_mw=0.0)
    request = job([0.0, 0.0], leaky, stored=1.6, products=[product("down")])
    # 1.6 falls to 0.8 in the first hour, whose ceiling is the maximum of 1.0, below what it starts with: nothing. In
    # the second it starts at 0.8 with 0.2 MWh of room: 0.4 MW.
    assert margin_of(request) == pytest.approx(4.0)


def test_store_held_out_holds_no_reserve() -> None:
    request = job([0.0], store(), stored=1.0, products=[product("up")])
    request |= {"initial": {}, "targets": {}, "missing_initial": "hold_out"}
    assert margin_of(request) == pytest.approx(0.0)
    request["missing_initial"] = "assume_middle"
    assert margin_of(request) == pytest.approx(20.0)


def test_generator_holds_reserve_between_its_limits_while_it_runs() -> None:
    running = {"mill-g1": {"on": True}}
    # At 1.6 MW: 0.4 MW up and 0.6 MW down; all of 1-2 MW earns 10 for the one or 9 for the other, fuel costs 40.
    both = [product("up", 10.0), product("down", 9.0)]
    assert margin_of(job([40.0], generator(), initial=running, products=both)) == pytest.approx(10.0)
    assert margin_of(job([45.0], generator(), initial=running, products=both)) == pytest.approx(14.0 + 5.0)
    # Off it holds nothing: 1 MW at 20 below cost for 10 of reserve is not worth it.
    assert margin_of(job([20.0], generator(), products=both)) == pytest.approx(0.0)


def test_asset_holds_only_the_products_it_may() -> None:
    barred = generator(reserve_products=["down"])
    assert margin_of(job([40.0], barred, products=[product("up", 10.0)])) == pytest.approx(0.0)


def test_reserve_is_constant_in_blocks_from_local_midnight() -> None:
    products = [product("up", 10.0, block_hours=2)]
    outage = {"asset": "wharf-b1", "kind": "forced", "from": at(3), "to": at(4), "available_fraction": 0.5}
    dear = store(charge_limit_mw=0.0, wear_cost_per_mwh=99.0)
    request = job([0.0] * 4, dear, stored=2.0, products=products, outages=[outage])
    # 1 MW in the first block; in the second 0.5 MW throughout, as no more is left in its last hour.
    assert best(request).reserves == {"wharf-b1": {"up": pytest.approx([1.0, 1.0, 0.5, 0.5])}}
    request["window"]["start"] = at(3)
    # From 03:00 the first block is cut to one hour: the outage stands in it alone.
    assert best(request).reserves == {"wharf-b1": {"up": pytest.approx([0.5, 1.0, 1.0, 1.0])}}


def test_reserve_goes_through_the_connection_both_ways() -> None:
    sites = [{"id": "fen", "export_limit_mw": 0.7, "import_limit_mw": 0.4}]
    for direction, most in (("up", 0.7 + 0.4), ("down", 0.7 + 0.4), ("symmetric", 0.55)):
        request = job([0.0], store(site="fen"), stored=1.0, sites=sites, products=[product(direction)])
        assert margin_of(request) == pytest.approx(10.0 * most)
    narrow = job([0.0], store(), stored=1.0, fleet={"export_limit_mw": 0.2, "import_limit_mw": 0.0})
    narrow["window"]["reserve_products"] = [product("up")]
    assert margin_of(narrow) == pytest.approx(2.0)


def test_island_holds_reserve_for_its_own_load() -> None:
    load = BASE | {"site": "skerry"}
    unit = generator(site="skerry")
    members: Document = {"forecasts": {"fen-base": 1.5}, "products": [product("up", 10.0)]}
    # 1.5 MW at 40; the 0.5 MW left is held.
    assert margin_of(job([0.0], load, unit, sites=[ISLAND], **members)) == pytest.approx(-60.0 + 5.0)
    one_way = ISLAND | {"import_limit_mw": 9.0}
    # With a limit of 0 one way only it is no island: 1 MW is bought for nothing and 1.5 MW are not: off, no reserve.
    assert margin_of(job([0.0], load, unit, sites=[one_way], **members)) == pytest.approx(0.0)
    assert is_impossible(job([0.0], load, generator(site="skerry", max_output_mw=1.4), sites=[ISLAND], **members))


def test_reserve_of_several_counts_together_for_a_site_and_alone_for_assets() -> None:
    units = [store("wharf-b1", site="fen"), store("wharf-b2", site="fen")]
    products = [product("up", 0.0)]
    members: Document = {"stored": 1.0, "sites": [{"id": "fen"}], "products": products}
    due = {"product": "up", "power_mw": 3.5}
    together = owed("reserve_holding", {"site": "fen"}, **due)
    assert margin_of(job([0.0], *units, commitments=[together], **members)) == pytest.approx(0.0)
    alone = owed("reserve_holding", {"assets": ["wharf-b1", "wharf-b2"]}, **due)
    assert is_impossible(job([0.0], *units, commitments=[alone], **members))
    alone["shortfall_price_per_mw_per_hour"] = 8.0
    # Each can hold 2 MW at most, charging at 1 MW: 1.5 MW short, twice.
    assert margin_of(job([0.0], *units, commitments=[alone], **members)) == pytest.approx(-24.0)


def test_firm_power_is_due_at_the_meter_with_standby_and_at_the_terminals_without() -> None:
    thirsty = store(standby_load_mw=0.1)
    firm = owed("firm_delivery", power_mw=[1.0])
    assert margin_of(job([10.0], thirsty, stored=1.0, commitments=[firm])) == pytest.approx(9.0)
    firm["applies_to"] = {"group": ["wharf-b1"]}
    assert is_impossible(job([10.0], thirsty, stored=1.0, commitments=[firm]))
    firm["shortfall_price_per_mwh"] = 100.0
    assert margin_of(job([10.0], thirsty, stored=1.0, commitments=[firm])) == pytest.approx(9.0 - 10.0)


def test_generators_rated_power_counts_in_sums_and_renewables_have_none() -> None:
    whole = owed("hours_at_most", {"fleet": True}, threshold={"fraction_of_rated": 0.5}, hours=0)
    members: Document = {"forecasts": {"fen-w1": 5.0}, "commitments": [whole]}
    # Rated 2 MW for the generator and 1 MW for the store: 1.5 MW may be sold.
    assert margin_of(job([30.0], generator(), store(), WIND, **members)) == pytest.approx(45.0)


def test_threshold_of_nothing_allows_no_hour_above_it() -> None:
    never = owed("hours_at_most", threshold={"mw": 0.0}, hours=1)
    assert margin_of(job([10.0, 20.0], store(), stored=2.0, commitments=[never])) == pytest.approx(20.0)


def test_energy_of_a_sum_counts_what_is_left_of_each_hour() -> None:
    base = BASE | {"site": "fen"}
    asked = owed("energy_at_least", {"site": "fen"}, energy_mwh=0.5)
    members: Document = {"forecasts": {"fen-base": [0.5, 0.5]}, "sites": [{"id": "fen"}]}
    # Half a MWh net: 1 MW against the load in one hour counts 0.5, and -0.5 in the other counts nothing.
    request = job([10.0, 0.0], base, store(site="fen"), stored=1.0, commitments=[asked], **members)
    assert margin_of(request) == pytest.approx(5.0)
    asked["energy_mwh"] = 0.6
    assert is_impossible(request)
