"""Lots: the smallest case where the net power is a whole number of them, and the same where it just is not.

Every figure is worked out by hand in the test; the audit has passed every schedule.
"""

from typing import Any

import pytest

from tests.workers.planning.jobs import fixed_load, generator, job, planned, power_of, refused, renewable, store

Document = dict[str, Any]


def at_quay(*plants: Document, lot: float = 0.5, price: float = 10.0, **members: Any) -> Document:
    """Return an hour of a site that trades in lots."""
    return job(
        [price], *(plant | {"site": "quay"} for plant in plants), sites=[{"id": "quay", "lot_mw": lot}], **members
    )


@pytest.mark.parametrize(("limit", "power"), [(0.49, 0.0), (0.5, 0.5), (0.99, 0.5), (1.0, 1.0)])
def test_a_site_sells_whole_lots(limit: float, power: float) -> None:
    found = planned(at_quay(store(discharge_limit_mw=limit), stored=2.0))
    assert found.sites[0].power_mw == pytest.approx([power])
    assert found.margin == pytest.approx(10.0 * power)


def test_a_site_buys_whole_lots() -> None:
    found = planned(at_quay(store(charge_limit_mw=0.75), price=-10.0))
    assert found.sites[0].power_mw == pytest.approx([-0.5])


def test_a_lot_is_counted_net_of_what_loads_draw() -> None:
    document = at_quay(store(standby_load_mw=0.05), fixed_load(), stored=2.0, forecasts={"quay-mill": 0.2})
    found = planned(document)
    assert power_of(found, "quay-b1") == pytest.approx([0.75])
    assert found.sites[0].power_mw == pytest.approx([0.5])


@pytest.mark.parametrize(("load", "fits"), [(0.5, True), (1.0, True), (0.75, False)])
def test_a_load_alone_is_a_whole_number_of_lots_or_refused(load: float, fits: bool) -> None:
    document = at_quay(fixed_load(), forecasts={"quay-mill": load})
    if fits:
        assert planned(document).sites[0].power_mw == pytest.approx([-load])
    else:
        refused(document)


def test_what_cannot_be_curtailed_is_rounded_by_what_can_move() -> None:
    # 1.2 MW of sun and a store that takes the odd 0.2 MW.
    fixed_sun = renewable(curtailable=False)
    document = at_quay(fixed_sun, store(), forecasts={"quay-pv": 1.2})
    assert power_of(planned(document), "quay-b1") == pytest.approx([-0.2])
    refused(at_quay(fixed_sun, store(charge_limit_mw=0.19), forecasts={"quay-pv": 1.2}))


@pytest.mark.parametrize(("least", "power"), [(1.5, 1.5), (1.6, 0.0)])
def test_a_generator_whose_range_holds_no_lot_stays_off(least: float, power: float) -> None:
    document = at_quay(generator(min_output_mw=least, max_output_mw=1.9), lot=1.5)
    assert power_of(planned(document), "quay-g1") == pytest.approx([power])


def test_a_fleet_trades_in_lots_of_its_own() -> None:
    # 0.75 MW each at meters of their own: 1 MW together.
    pair = [store(discharge_limit_mw=0.75), store("mole-b1", discharge_limit_mw=0.75)]
    found = planned(job([10.0], *pair, stored=2.0, fleet={"lot_mw": 1.0}))
    assert found.fleet.power_mw == pytest.approx([1.0])
    assert planned(job([10.0], *pair, stored=2.0)).fleet.power_mw == pytest.approx([1.5])


def test_lots_of_a_site_and_of_the_fleet_hold_together() -> None:
    # The site sells a multiple of 0.4 MW, the fleet one of 1 MW: 0.8 MW there and 0.2 MW elsewhere.
    elsewhere = store("mole-b1", discharge_limit_mw=0.3)
    document = at_quay(store(), lot=0.4, stored=2.0)
    document["fleet"]["assets"].append(elsewhere)
    document["fleet"]["lot_mw"] = 1.0
    document["initial"]["mole-b1"] = {"stored_mwh": 2.0}
    document["targets"]["mole-b1"] = {"final_stored_mwh": 0.0}
    found = planned(document)
    assert found.sites[0].power_mw == pytest.approx([0.8])
    assert found.fleet.power_mw == pytest.approx([1.0])
