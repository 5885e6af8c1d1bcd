"""For each kind of commitment the smallest case where it just holds, and the same where it just breaks or costs.

Hours at least stand in `test_rules`, reserve holding in `test_reserve`. Every figure is worked out by hand in the
test; the audit has passed every schedule.
"""

from typing import Any

import pytest

from tests.workers.planning.jobs import fixed_load, generator, job, planned, power_of, refused, renewable, store

Document = dict[str, Any]
B1 = "quay-b1"
QUAY = {"assets": [B1]}
SITE = {"site": "quay"}


def at(hour: int) -> str:
    return f"2027-02-09T{hour:02d}:00:00Z"


def promise(kind: str, whom: Document = QUAY, **members: Any) -> Document:
    return {"id": "promise", "kind": kind, "applies_to": whom} | members


def selling(prices: list[float], *promises: Document, stored: float = 2.0, **changes: Any) -> Document:
    """Return a job of a store that only sells."""
    return job(prices, store(charge_limit_mw=0.0, **changes), stored=stored, commitments=list(promises))


def loaded(prices: list[float], load: float | list[float], *promises: Document, **changes: Any) -> Document:
    """Return a job of a store of 2 MWh that only sells, on one site with a load."""
    seller = store(charge_limit_mw=0.0, site="quay", **changes)
    forecasts = {"quay-mill": load}
    plants = (seller, fixed_load(site="quay"))
    return job(prices, *plants, stored=2.0, sites=[{"id": "quay"}], forecasts=forecasts, commitments=list(promises))


# hours at most


def at_most(hours: float, whom: Document = QUAY, mw: float = 0.5, **changes: Any) -> Document:
    return promise("hours_at_most", whom, threshold={"mw": mw}, hours=hours, **changes)


@pytest.mark.parametrize(("allowed", "powers"), [(2, [1.0, 1.0]), (1, [0.5, 1.0]), (0, [0.5, 0.5])])
def test_power_is_above_the_threshold_in_so_many_hours(allowed: float, powers: list[float]) -> None:
    # At the threshold is not above it: the hours at 20 are used first.
    found = planned(selling([10.0, 20.0], at_most(allowed)))
    assert power_of(found, B1) == pytest.approx(powers)
    assert found.commitments[0].delivered_hours == pytest.approx(sum(power > 0.5 for power in powers))


def test_headroom_is_taken_off_but_hours_count_at_the_threshold() -> None:
    found = planned(selling([10.0, 20.0], at_most(1, headroom_mw=0.25)))
    assert power_of(found, B1) == pytest.approx([0.25, 1.0])
    assert found.commitments[0].delivered_hours == pytest.approx(1.0)
    assert power_of(planned(selling([10.0, 20.0], at_most(1, headroom_mw=0.75))), B1) == pytest.approx([0.0, 1.0])


def test_an_excused_hour_does_not_count_against() -> None:
    found = planned(selling([10.0, 20.0], at_most(0, excused=[{"from": at(1), "to": at(2)}])))
    assert power_of(found, B1) == pytest.approx([0.5, 1.0])


@pytest.mark.parametrize(("counted", "powers"), [(0.0, [0.5, 1.0]), (1.0, [0.5, 0.5])])
def test_hours_counted_before_are_used_up(counted: float, powers: list[float]) -> None:
    document = selling([10.0, 20.0], at_most(1))
    document["counted_before"] = {"commitments": {"promise": {B1: counted}}}
    assert power_of(planned(document), B1) == pytest.approx(powers)


@pytest.mark.parametrize(("price", "margin"), [(4.0, 30.0 - 8.0), (6.0, 25.0 - 6.0), (11.0, 15.0)])
def test_hours_above_are_bought_when_they_earn_more(price: float, margin: float) -> None:
    # Half a megawatt more earns 5 in the first hour and 10 in the second.
    found = planned(selling([10.0, 20.0], at_most(0, shortfall_price_per_hour=price)))
    assert found.margin == pytest.approx(margin)


def test_quarters_of_an_hour_count_as_such() -> None:
    document = selling([10.0, 20.0, 30.0, 40.0], at_most(0.5))
    document["window"]["interval"] = "PT15M"
    assert power_of(planned(document), B1) == pytest.approx([0.5, 0.5, 1.0, 1.0])


def test_hours_of_charging_count_in_their_direction() -> None:
    document = job([-10.0, -20.0], store(), commitments=[at_most(1, direction="charge")])
    assert power_of(planned(document), B1) == pytest.approx([-0.5, -1.0])
    document["commitments"] = [at_most(0)]
    assert power_of(planned(document), B1) == pytest.approx([-1.0, -1.0])


def test_a_fraction_of_rated_power_is_a_threshold_too() -> None:
    quarter = at_most(0) | {"threshold": {"fraction_of_rated": 0.25}}
    assert power_of(planned(selling([10.0], quarter)), B1) == pytest.approx([0.25])
    runner = generator("quay-g1")
    document = job([10.0], runner, commitments=[quarter | {"applies_to": {"assets": ["quay-g1"]}}])
    assert power_of(planned(document), "quay-g1") == pytest.approx([1.0])


def test_a_sum_counts_net_of_its_load() -> None:
    # The load takes 0.25 of the 0.75 MW that leave 0.5 MW at the meter.
    assert power_of(planned(loaded([10.0], 0.25, at_most(0, SITE))), B1) == pytest.approx([0.75])


@pytest.mark.parametrize(("hours", "fits"), [(1, True), (0, False)])
def test_what_cannot_be_curtailed_counts_or_is_refused(hours: float, fits: bool) -> None:
    wind = renewable("quay-w1", curtailable=False)
    document = job([10.0], wind, forecasts={"quay-w1": 0.6}, commitments=[at_most(hours, {"assets": ["quay-w1"]})])
    if fits:
        assert planned(document).commitments[0].met
    else:
        refused(document)


# firm delivery


def firm(mw: float | list[float], whom: Document = QUAY, **changes: Any) -> Document:
    return promise("firm_delivery", whom, power_mw=mw, **changes)


def test_power_that_is_due_is_delivered_and_costs_what_it_displaces() -> None:
    # 1 MWh earns 50 in the second hour; half of it has to go in the first at 10.
    found = planned(selling([10.0, 50.0], firm([0.5, 0.0]), stored=1.0))
    assert power_of(found, B1) == pytest.approx([0.5, 0.5])
    assert (found.commitments[0].required_mwh, found.commitments[0].delivered_mwh) == pytest.approx((0.5, 0.5))


def test_power_is_due_to_the_last_kilowatt_or_refused() -> None:
    assert planned(selling([-10.0], firm(1.0))).margin == pytest.approx(-10.0)
    refused(selling([-10.0], firm(1.001)))


def test_nothing_is_due_in_excused_hours_nor_outside_the_row() -> None:
    assert planned(selling([-10.0, -10.0], firm(1.0, to=at(1)))).margin == pytest.approx(-10.0)
    excused = [{"from": at(0), "to": at(2)}]
    assert planned(selling([-10.0, -10.0], firm(1.001, excused=excused))).margin == pytest.approx(0.0)


@pytest.mark.parametrize(("price", "margin"), [(39.0, 50.0 - 19.5), (41.0, 30.0)])
def test_a_shortfall_is_paid_when_that_is_cheaper(price: float, margin: float) -> None:
    # Moving half a megawatt hour from 50 to 10 costs 20.
    found = planned(selling([10.0, 50.0], firm([0.5, 0.0], shortfall_price_per_mwh=price), stored=1.0))
    assert found.margin == pytest.approx(margin)
    assert found.commitments[0].met is (price == 41.0)


def test_a_shortfall_is_never_more_than_what_is_due() -> None:
    # The meter draws 1 MW whatever happens: 0.5 MWh are missing, not 1.5 MWh.
    document = loaded([0.0], 1.0, firm(0.5, SITE, shortfall_price_per_mwh=10.0), discharge_limit_mw=0.0)
    found = planned(document)
    assert found.totals.shortfall_cost == pytest.approx(5.0)
    assert found.commitments[0].delivered_mwh == pytest.approx(0.0)


def test_a_sum_delivers_firmly_net_of_its_load() -> None:
    assert power_of(planned(loaded([-10.0], 0.25, firm(0.75, SITE))), B1) == pytest.approx([1.0])
    refused(loaded([-10.0], 0.25, firm(0.76, SITE)))


def test_power_may_be_due_into_a_store() -> None:
    due = firm(0.5, direction="charge")
    assert power_of(planned(job([10.0], store(), commitments=[due])), B1) == pytest.approx([-0.5])
    refused(job([10.0], store(charge_limit_mw=0.49), commitments=[due]))


def test_what_was_delivered_before_makes_up_for_no_firm_power() -> None:
    document = selling([-10.0], firm(1.0))
    document["counted_before"] = {"commitments": {"promise": {B1: 1.0}}}
    assert planned(document).margin == pytest.approx(-10.0)


# energy at least


def at_least(mwh: float, whom: Document = QUAY, **changes: Any) -> Document:
    return promise("energy_at_least", whom, energy_mwh=mwh, **changes)


def below(mwh: float, whom: Document = QUAY, **changes: Any) -> Document:
    return promise("energy_at_most", whom, energy_mwh=mwh, **changes)


def test_energy_that_is_due_is_delivered_where_it_costs_least() -> None:
    found = planned(selling([-10.0, -20.0], at_least(1.5)))
    assert power_of(found, B1) == pytest.approx([1.0, 0.5])
    assert found.commitments[0].delivered_mwh == pytest.approx(1.5)


def test_energy_is_due_to_the_last_kilowatt_hour_or_refused() -> None:
    assert planned(selling([-10.0, -20.0], at_least(2.0))).margin == pytest.approx(-30.0)
    refused(selling([-10.0, -20.0], at_least(2.001)))
    refused(selling([-10.0, -20.0], at_least(1.001, to=at(1))))


@pytest.mark.parametrize(("price", "margin"), [(9.0, -13.5), (15.0, -10.0 - 7.5), (21.0, -20.0)])
def test_missing_energy_is_paid_when_that_is_cheaper(price: float, margin: float) -> None:
    # 1.5 MWh: the first costs 10, the rest 20 per MWh.
    found = planned(selling([-10.0, -20.0], at_least(1.5, shortfall_price_per_mwh=price)))
    assert found.margin == pytest.approx(margin)


def test_energy_delivered_before_is_owed_no_more() -> None:
    document = selling([-10.0], at_least(1.5))
    refused(document)
    document["counted_before"] = {"commitments": {"promise": {B1: 0.5}}}
    found = planned(document)
    assert found.margin == pytest.approx(-10.0)
    assert found.commitments[0].delivered_mwh == pytest.approx(1.5)


def test_charging_takes_nothing_off_the_energy_delivered() -> None:
    # Bought at 10 and sold at 5, for 1 MWh that is due.
    found = planned(job([10.0, 5.0], store(), commitments=[at_least(1.0)]))
    assert power_of(found, B1) == pytest.approx([-1.0, 1.0])
    refused(job([10.0, 5.0], store(), commitments=[at_least(1.001)]))


def test_energy_may_be_due_into_a_store() -> None:
    found = planned(job([30.0, 10.0], store(), commitments=[at_least(1.5, direction="charge")]))
    assert power_of(found, B1) == pytest.approx([-0.5, -1.0])
    # What is sold in between is charged again: a store of 1 MWh takes 2 MWh in three hours.
    small = store(energy_capacity_mwh=1.0)
    assert planned(job([10.0] * 3, small, commitments=[at_least(2.0, direction="charge")])).margin < 0.0
    refused(job([10.0] * 3, small, commitments=[at_least(2.001, direction="charge")]))


@pytest.mark.parametrize(("load", "most"), [(0.5, 1.0), ([0.5, 2.0], 0.5)])
def test_a_sum_delivers_what_its_meter_exports_and_imports_take_nothing_off(
    load: float | list[float], most: float
) -> None:
    # In the second case the meter draws 1 MW in the second hour at best: what counts then is 0.
    assert planned(loaded([0.0, 0.0], load, at_least(most, SITE))).commitments[0].delivered_mwh == pytest.approx(most)
    refused(loaded([0.0, 0.0], load, at_least(most + 0.001, SITE)))


def test_flows_within_a_sum_do_not_count() -> None:
    # One store could fill another for ever: the meter sees nothing of it.
    pair = [store(site="quay"), store("quay-b2", site="quay")]
    document = job([10.0, 10.0], *pair, stored=0.5, sites=[{"id": "quay"}], commitments=[at_least(1.0, SITE)])
    assert planned(document).margin == pytest.approx(10.0)
    # More takes buying in the one hour and selling in the other: 2 MW there and back at most.
    document["commitments"] = [at_least(2.0, SITE)]
    found = planned(document)
    assert found.sites[0].power_mw == pytest.approx([-1.0, 2.0])
    document["commitments"] = [at_least(2.001, SITE)]
    refused(document)


# energy at most


def test_energy_is_capped_where_it_earns_least() -> None:
    found = planned(selling([10.0, 20.0], below(1.5)))
    assert power_of(found, B1) == pytest.approx([0.5, 1.0])
    assert planned(selling([10.0, 20.0], below(0.0))).margin == pytest.approx(0.0)


@pytest.mark.parametrize(("price", "margin"), [(9.0, 30.0 - 4.5), (11.0, 25.0)])
def test_energy_beyond_the_cap_is_bought_when_it_earns_more(price: float, margin: float) -> None:
    found = planned(selling([10.0, 20.0], below(1.5, shortfall_price_per_mwh=price)))
    assert found.margin == pytest.approx(margin)
    assert found.commitments[0].met is (price == 11.0)


def test_energy_counted_before_is_used_up() -> None:
    document = selling([10.0, 20.0], below(1.5))
    document["counted_before"] = {"commitments": {"promise": {B1: 1.0}}}
    assert planned(document).margin == pytest.approx(10.0)


def test_a_cap_leaves_the_other_direction_and_other_hours_free() -> None:
    assert planned(selling([10.0, 20.0], below(0.0, to=at(1)))).margin == pytest.approx(20.0)
    assert planned(job([-10.0], store(), commitments=[below(0.0)])).margin == pytest.approx(10.0)
    capped = below(0.25, direction="charge")
    assert planned(job([-10.0], store(), commitments=[capped])).margin == pytest.approx(2.5)


@pytest.mark.parametrize(("load", "margin"), [(0.0, 10.0), (0.5, 10.0)])
def test_what_a_meter_imports_makes_no_room_under_a_cap_of_exports(load: float, margin: float) -> None:
    # Whatever it draws in the first hour at 0, it exports 0.5 MWh at 20 in the second.
    document = loaded([0.0, 20.0], [load, 0.0], below(0.5, SITE))
    assert planned(document).margin == pytest.approx(margin)


def test_a_sum_is_capped_net_of_its_load() -> None:
    # 1 MW at the terminals, of which the load takes 0.5 MW.
    assert power_of(planned(loaded([10.0], 0.5, below(0.5, SITE))), B1) == pytest.approx([1.0])
    assert power_of(planned(loaded([10.0], 0.5, below(0.25, SITE))), B1) == pytest.approx([0.75])


def test_each_asset_has_a_cap_of_its_own_and_a_group_shares_one() -> None:
    def of(whom: Document) -> Document:
        pair = [store(charge_limit_mw=0.0), store("quay-b2", charge_limit_mw=0.0)]
        return job([10.0], *pair, stored=2.0, commitments=[below(0.75, whom)])

    assert planned(of({"assets": [B1, "quay-b2"]})).margin == pytest.approx(15.0)
    assert planned(of({"group": [B1, "quay-b2"]})).margin == pytest.approx(7.5)


def test_each_day_has_its_own_energy() -> None:
    # The window begins at 23:00: one hour of the first day, one of the next, 0.5 MWh each.
    document = selling([10.0, 20.0], below(0.5, each_day=True))
    document["window"]["start"] = "2027-02-09T23:00:00Z"
    found = planned(document)
    assert found.margin == pytest.approx(15.0)
    assert [row.day for row in found.commitments] == ["2027-02-09", "2027-02-10"]
