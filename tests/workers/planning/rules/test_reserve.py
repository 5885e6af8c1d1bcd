"""For each rule of reserve the smallest case where it just holds, and the same where it just breaks or costs.

Every figure is worked out by hand in the test; the audit has passed every schedule.
"""

from typing import Any

import pytest

from tests.workers.planning.jobs import (
    fixed_load,
    generator,
    job,
    outage,
    planned,
    power_of,
    product,
    refused,
    reserve_of,
    store,
)

Document = dict[str, Any]
B1, G1 = "quay-b1", "quay-g1"
UP, DOWN, BOTH = "up-60", "down-60", "both-60"


def up(price: float | list[float] = 5.0, **changes: Any) -> Document:
    return product(UP, price_per_mw_per_hour=price, **changes)


def down(price: float = 5.0, **changes: Any) -> Document:
    return product(DOWN, direction="down", price_per_mw_per_hour=price, **changes)


def both(price: float = 5.0, **changes: Any) -> Document:
    return product(BOTH, direction="symmetric", price_per_mw_per_hour=price, **changes)


def market(prices: list[float], products: list[Document], *plants: Document, **members: Any) -> Document:
    """Return a job whose window has reserve products."""
    window = {"reserve_products": products} | members.pop("window", {})
    return job(prices, *plants, window=window, **members)


# income, power


def test_reserve_held_is_paid_by_the_hour_committed_or_not() -> None:
    document = market([100.0, 100.0], [up([5.0, 7.0])], store(charge_limit_mw=0.0), stored=1.0, final=1.0)
    found = planned(document)
    assert reserve_of(found, B1) == pytest.approx([1.0, 1.0])
    assert found.totals.reserve_income == pytest.approx(12.0)
    document["window"] |= {"interval": "PT15M"}
    assert planned(document).margin == pytest.approx(3.0)


@pytest.mark.parametrize(("price", "power"), [(9.0, 1.0), (11.0, 0.0)])
def test_up_reserve_takes_power_that_energy_could_have(price: float, power: float) -> None:
    found = planned(market([10.0], [up(price)], store(charge_limit_mw=0.0), stored=2.0))
    assert power_of(found, B1) == pytest.approx([power])
    assert found.margin == pytest.approx(max(price, 10.0))


@pytest.mark.parametrize(("price", "power"), [(9.0, -1.0), (11.0, 0.0)])
def test_down_reserve_takes_power_that_charging_could_have(price: float, power: float) -> None:
    empty = store(discharge_limit_mw=0.0, energy_capacity_mwh=8.0)
    found = planned(market([-10.0], [down(price)], empty))
    assert power_of(found, B1) == pytest.approx([power])
    assert found.margin == pytest.approx(max(price, 10.0))


def test_a_store_that_charges_holds_up_reserve_by_stopping() -> None:
    # Charging 1 MW at 10 lets it hold 2 MW: two MW at 11 less 10.
    full = store(energy_capacity_mwh=8.0)
    found = planned(market([10.0], [up(11.0)], full, stored=4.0, final=4.0))
    assert reserve_of(found, B1) == pytest.approx([2.0])
    assert found.margin == pytest.approx(12.0)
    assert planned(market([10.0], [up(9.0)], full, stored=4.0, final=4.0)).margin == pytest.approx(9.0)


@pytest.mark.parametrize(("left", "held"), [(1.0, 1.0), (0.5, 0.5), (0.0, 0.0)])
def test_an_outage_takes_reserve_with_the_power(left: float, held: float) -> None:
    still = store(charge_limit_mw=0.0)
    found = planned(market([0.0], [up()], still, stored=2.0, final=2.0, outages=[outage(B1, 0, 1, left)]))
    assert reserve_of(found, B1) == pytest.approx([held])


# energy at both ends


@pytest.mark.parametrize(
    ("minutes", "efficiency", "held"), [(60.0, 1.0, 0.5), (30.0, 1.0, 1.0), (60.0, 0.5, 0.25), (0.0, 0.5, 1.0)]
)
def test_up_reserve_is_backed_by_what_is_stored_for_as_long_as_it_lasts(
    minutes: float, efficiency: float, held: float
) -> None:
    # 0.5 MWh are there: at half efficiency only 0.25 MWh come out.
    still = store(charge_limit_mw=0.0, discharge_efficiency=efficiency)
    found = planned(market([0.0], [up(sustain_minutes=minutes)], still, stored=0.5, final=0.5))
    assert reserve_of(found, B1) == pytest.approx([held])


@pytest.mark.parametrize(
    ("minutes", "efficiency", "held"), [(60.0, 1.0, 0.5), (30.0, 1.0, 1.0), (60.0, 0.8, 0.625), (0.0, 1.0, 1.0)]
)
def test_down_reserve_needs_room_for_as_long_as_it_lasts(minutes: float, efficiency: float, held: float) -> None:
    # There is room for 0.5 MWh: at an efficiency of 0.8 that takes 0.625 MWh.
    still = store(discharge_limit_mw=0.0, charge_efficiency=efficiency)
    found = planned(market([0.0], [down(sustain_minutes=minutes)], still, stored=1.5, final=1.5))
    assert reserve_of(found, B1, DOWN) == pytest.approx([held])


def test_up_reserve_is_backed_above_the_floor() -> None:
    floored = store(charge_limit_mw=0.0, min_stored_mwh=0.75)
    assert planned(market([0.0], [up()], floored, stored=1.0, final=1.0)).margin == pytest.approx(5.0 * 0.25)


@pytest.mark.parametrize(("price", "margin"), [(19.0, 20.0), (21.0, 21.0)])
def test_energy_sold_in_an_interval_backs_nothing_at_its_end(price: float, margin: float) -> None:
    # 1 MWh is there, and power for twice that: sold at 20, or kept to the end of the hour.
    strong = store(discharge_limit_mw=2.0, charge_limit_mw=0.0)
    assert planned(market([20.0], [up(price)], strong, stored=1.0)).margin == pytest.approx(margin)


def test_energy_bought_in_an_interval_backs_nothing_at_its_start() -> None:
    found = planned(market([1.0, 1.0], [up()], store()))
    assert reserve_of(found, B1) == pytest.approx([0.0, 1.0])
    assert found.margin == pytest.approx(5.0 - 1.0)
    assert planned(market([1.0], [up()], store())).margin == pytest.approx(0.0)


def test_room_made_in_an_interval_serves_down_reserve_only_after_it() -> None:
    found = planned(market([1.0, 1.0], [down()], store(), stored=2.0, final=1.0))
    assert reserve_of(found, B1, DOWN) == pytest.approx([0.0, 1.0])
    assert found.margin == pytest.approx(5.0 + 1.0)


def test_a_store_above_a_falling_ceiling_holds_no_down_reserve_until_it_is_below() -> None:
    # 2 MWh above a ceiling of 1 MWh, half of it lost in an hour; the hour at 1 empties the rest.
    leaking = store(max_stored_mwh=1.0, self_discharge_per_hour=0.5, charge_limit_mw=1.0)
    found = planned(market([1.0, 0.0], [down()], leaking, stored=2.0))
    assert reserve_of(found, B1, DOWN) == pytest.approx([0.0, 1.0])


# symmetric, several products, who may hold


@pytest.mark.parametrize(("stored", "held"), [(0.25, 0.25), (1.0, 1.0), (1.75, 0.25)])
def test_symmetric_reserve_is_backed_both_ways(stored: float, held: float) -> None:
    found = planned(market([100.0], [both()], store(), stored=stored, final=stored))
    assert reserve_of(found, B1, BOTH) == pytest.approx([held])


@pytest.mark.parametrize(("single", "symmetric", "margin"), [(5.0, 4.0, 5.0), (4.0, 5.0, 5.0)])
def test_products_of_one_direction_share_what_backs_them(single: float, symmetric: float, margin: float) -> None:
    document = market([0.0], [up(single), both(symmetric)], store(), stored=1.0, final=1.0)
    assert planned(document).margin == pytest.approx(margin)


def test_products_of_opposite_directions_do_not_share() -> None:
    document = market([0.0], [up(5.0), down(4.0)], store(), stored=1.0, final=1.0)
    assert planned(document).margin == pytest.approx(9.0)


@pytest.mark.parametrize(("allowed", "margin"), [(None, 9.0), ([DOWN], 4.0), ([], 0.0)])
def test_only_the_products_an_asset_may_hold_are_held(allowed: list[str] | None, margin: float) -> None:
    picky = store(reserve_products=allowed)
    assert planned(market([0.0], [up(5.0), down(4.0)], picky, stored=1.0, final=1.0)).margin == pytest.approx(margin)


def test_a_store_held_out_holds_nothing() -> None:
    document = market([0.0], [up()], store(), missing_initial="hold_out") | {"initial": {}, "targets": {}}
    assert planned(document).margin == pytest.approx(0.0)


# generators


@pytest.mark.parametrize(("products", "power", "margin"), [([up()], 1.0, 17.0), ([down()], 4.0, 23.0)])
def test_a_running_generator_holds_what_lies_between_its_limits(
    products: list[Document], power: float, margin: float
) -> None:
    # Each MWh earns 2, each MW held 5: 1 MW with 3 up, 4 MW with 3 down.
    found = planned(market([10.0], products, generator(cost={"linear_per_mwh": 8.0})))
    assert power_of(found, G1) == pytest.approx([power])
    assert found.margin == pytest.approx(margin)


@pytest.mark.parametrize(("price", "margin"), [(2.0, 0.0), (3.0, 1.0)])
def test_a_generator_has_to_run_to_hold_reserve(price: float, margin: float) -> None:
    # At its minimum it burns 8 and holds 3 MW.
    found = planned(market([0.0], [up(price)], generator(cost={"linear_per_mwh": 8.0})))
    assert found.margin == pytest.approx(margin)
    assert reserve_of(found, G1) == pytest.approx([3.0 if margin else 0.0])


def test_symmetric_reserve_of_a_generator_fits_both_ways() -> None:
    found = planned(market([0.0], [both()], generator()))
    assert power_of(found, G1) == pytest.approx([2.5])
    assert reserve_of(found, G1, BOTH) == pytest.approx([1.5])


def test_an_outage_lowers_what_a_generator_may_hold_upwards() -> None:
    document = market([0.0], [up()], generator(), outages=[outage(G1, 0, 1, 0.5)])
    assert reserve_of(planned(document), G1) == pytest.approx([1.0])


# blocks

DIP = [outage(G1, 1, 2, 0.5)]
"""In the second hour 1 MW above the minimum is left to hold, in every other 3 MW."""


@pytest.mark.parametrize(
    ("block", "held"),
    [(None, [3.0, 1.0, 3.0, 3.0]), (1, [3.0, 1.0, 3.0, 3.0]), (2, [1.0, 1.0, 3.0, 3.0]), (24, [1.0] * 4)],
)
def test_reserve_is_constant_within_a_block(block: float | None, held: list[float]) -> None:
    document = market([0.0] * 4, [up(block_hours=block)], generator(), outages=DIP)
    assert reserve_of(planned(document), G1) == pytest.approx(held)


@pytest.mark.parametrize(
    ("timezone", "start", "block", "dip", "held"),
    [
        # The window begins within a block: 01:00 is alone in what is left of it.
        ("UTC", "2027-02-09T01:00:00Z", 2, 1, [3.0, 1.0, 1.0, 3.0]),
        # 09:00 to 12:00 local are what is left of the block from 08:00.
        ("Asia/Tokyo", "2027-02-09T00:00:00Z", 4, 0, [1.0, 1.0, 1.0, 3.0]),
        # A block of a whole day ends at local midnight, 15:00 UTC.
        ("Asia/Tokyo", "2027-02-09T13:00:00Z", 24, 0, [1.0, 1.0, 3.0, 3.0]),
        # 05:30 local begins half an hour before a block does.
        ("Asia/Kolkata", "2027-02-09T00:00:00Z", 3, 1, [3.0, 1.0, 1.0, 1.0]),
        # The clock goes from 01:00 to 02:00: the first four hours of the day end at 05:00 by the clock.
        ("Europe/Lisbon", "2027-03-28T00:00:00Z", 4, 3, [1.0, 1.0, 1.0, 1.0, 3.0]),
    ],
)
def test_blocks_are_counted_from_local_midnight(
    timezone: str, start: str, block: float, dip: int, held: list[float]
) -> None:
    window = {"timezone": timezone, "start": start}
    document = market([0.0] * len(held), [up(block_hours=block)], generator(), window=window)
    hour = int(start[11:13]) + dip
    day = start[:10]
    out = {"from": f"{day}T{hour:02d}:00:00Z", "to": f"{day}T{hour + 1:02d}:00:00Z", "available_fraction": 0.5}
    document["outages"] = [out | {"asset": G1, "kind": "forced"}]
    assert reserve_of(planned(document), G1) == pytest.approx(held)


# connection


def pair(**site: Any) -> Document:
    """Return two stores with 1 MWh each that they keep, behind one meter where charging is dear."""
    members: Document = {"sites": [{"id": "quay"} | site]}
    stores = [store(site="quay"), store("quay-b2", site="quay")]
    return market([100.0], [up(5.0), down(4.0)], *stores, stored=1.0, final=1.0, **members)


@pytest.mark.parametrize(
    ("site", "margin"),
    [
        ({}, 18.0),
        ({"export_limit_mw": 2.0, "import_limit_mw": 2.0}, 18.0),
        ({"export_limit_mw": 1.5}, 5.0 * 1.5 + 4.0 * 2),
        ({"import_limit_mw": 1.5}, 5.0 * 2 + 4.0 * 1.5),
    ],
)
def test_reserve_that_may_be_called_fits_through_the_connection(site: Document, margin: float) -> None:
    assert planned(pair(**site)).margin == pytest.approx(margin)


def test_reserve_fits_through_the_connection_of_the_fleet() -> None:
    apart = [store(), store("mole-b1")]
    document = market([100.0], [up()], *apart, stored=1.0, final=1.0, fleet={"export_limit_mw": 1.25})
    assert planned(document).margin == pytest.approx(5.0 * 1.25)


def loaded(**site: Any) -> Document:
    """Return a generator without costs that serves a load of 2 MW on its site."""
    plants = [fixed_load(site="quay"), generator(site="quay")]
    return market([0.0], [up()], *plants, sites=[{"id": "quay"} | site], forecasts={"quay-mill": 2.0})


def test_a_load_leaves_room_for_reserve_behind_an_export_limit() -> None:
    # P - 2 + up <= 0 with P at least 1.
    assert reserve_of(planned(loaded(export_limit_mw=0.0)), G1) == pytest.approx([1.0])


def test_on_an_island_reserve_serves_its_own_load_and_is_not_counted() -> None:
    # P = 2, and all that is left above it may be held.
    assert reserve_of(planned(loaded(export_limit_mw=0.0, import_limit_mw=0.0)), G1) == pytest.approx([2.0])


def test_a_site_is_an_island_only_in_the_hours_without_both_limits() -> None:
    document = loaded(export_limit_mw=0.0, import_limit_mw=0.0)
    document["window"]["price_per_mwh"] = [0.0, 0.0]
    document["limits"] = {"quay": {"import_limit_mw": [0.0, 1.0]}}
    assert reserve_of(planned(document), G1) == pytest.approx([2.0, 1.0])


# reserve holding


def holding(whom: Document, mw: float | list[float], **changes: Any) -> Document:
    return {"id": "spare", "kind": "reserve_holding", "applies_to": whom, "product": UP, "power_mw": mw} | changes


QUAY = {"assets": [B1]}


@pytest.mark.parametrize(("price", "margin"), [(None, 0.0), (49.0, 1.0), (51.0, 0.0)])
def test_reserve_that_is_due_keeps_energy_from_being_sold(price: float | None, margin: float) -> None:
    # 1 MWh is sold at 50, or kept to back 1 MW; a cheap shortfall is paid instead.
    promise = holding(QUAY, 1.0, shortfall_price_per_mw_per_hour=price)
    found = planned(market([50.0], [up(0.0)], store(), stored=1.0, commitments=[promise]))
    assert found.margin == pytest.approx(margin)
    row = found.commitments[0]
    assert row.required_mw_hours == pytest.approx(1.0)
    assert row.delivered_mw_hours == pytest.approx(0.0 if price == 49.0 else 1.0)
    assert row.met is (price != 49.0)


def test_reserve_is_due_in_its_hours_alone() -> None:
    # Held in the first hour, sold in the second.
    promise = holding(QUAY, [1.0, 0.0])
    document = market([60.0, 50.0], [up(0.0)], store(charge_limit_mw=0.0), stored=1.0, commitments=[promise])
    assert power_of(planned(document), B1) == pytest.approx([0.0, 1.0])
    document["commitments"] = [holding(QUAY, 1.0, to="2027-02-09T01:00:00Z")]
    assert power_of(planned(document), B1) == pytest.approx([0.0, 1.0])


def test_reserve_is_held_to_the_last_kilowatt_or_refused() -> None:
    def of(mw: float) -> Document:
        document = market([0.0], [up()], store(charge_limit_mw=0.0), stored=0.5, final=0.5)
        return document | {"commitments": [holding(QUAY, mw)]}

    assert planned(of(0.5)).commitments[0].met
    refused(of(0.501))


@pytest.mark.parametrize("whom", [{"group": [B1, "mole-b1"]}, {"fleet": True}])
def test_several_hold_together_what_each_alone_cannot(whom: Document) -> None:
    def of(whom: Document, mw: float, **changes: Any) -> Document:
        document = market([0.0], [up(0.0)], store(), store("mole-b1"))
        state = {B1: {"stored_mwh": 1.0}, "mole-b1": {"stored_mwh": 0.5}}
        targets = {B1: {"final_stored_mwh": 1.0}, "mole-b1": {"final_stored_mwh": 0.5}}
        return document | {"initial": state, "targets": targets, "commitments": [holding(whom, mw, **changes)]}

    assert planned(of(whom, 1.5)).commitments[0].met
    refused(of(whom, 1.51))
    each = {"assets": [B1, "mole-b1"]}
    assert all(row.met for row in planned(of(each, 0.5)).commitments)
    refused(of(each, 0.51))
    # Priced, the smaller one is 0.25 MW short for an hour.
    found = planned(of(each, 0.75, shortfall_price_per_mw_per_hour=8.0))
    assert found.totals.shortfall_cost == pytest.approx(2.0)


def test_the_same_reserve_counts_in_every_commitment_that_covers_it() -> None:
    promises = [holding(QUAY, 1.0), holding({"fleet": True}, 1.0, id="all")]
    document = market([0.0], [up()], store(), stored=1.0, final=1.0, commitments=promises)
    assert all(row.met for row in planned(document).commitments)


def test_loads_and_renewables_hold_nothing() -> None:
    document = market([0.0], [up()], {"id": "quay-pv", "kind": "renewable"}, forecasts={"quay-pv": 3.0})
    assert planned(document).totals.reserve_income == 0.0
    document["commitments"] = [holding({"fleet": True}, 0.1)]
    refused(document)
