"""Money of meters and assets, worked out by hand from the powers."""

import json
from math import fsum
from pathlib import Path
from typing import Any

import pytest

from schemas.schedule import Totals
from tests.workers.planning.audit.small_jobs import audit, broken, job, load, one_store, store, window

STORAGE_SMALL = json.loads((Path(__file__).parents[3] / "reference" / "storage_small.json").read_text(encoding="utf-8"))


def money(totals: Totals) -> dict[str, float]:
    """Return what is not 0."""
    return {name: amount for name, amount in totals.model_dump().items() if amount}


def test_sales_and_purchases_are_price_times_energy() -> None:
    result = one_store([-2.0, 1.0], window=window([20.0, 50.0], interval="PT30M"))
    assert money(result.totals) == {"sales": 25.0, "purchases": 20.0}
    assert result.margin == 5.0


def test_buying_and_selling_have_their_own_prices() -> None:
    market = window(buy_price_per_mwh=[30.0, 70.0], sell_price_per_mwh=[25.0, 60.0])
    result = one_store([-1.0, 1.0], window=market)
    assert money(result.totals) == {"sales": 60.0, "purchases": 30.0}


def test_a_price_may_be_one_number_beside_a_series() -> None:
    result = one_store([-1.0, 1.0], window=window(buy_price_per_mwh=30.0, sell_price_per_mwh=[25.0, 60.0]))
    assert money(result.totals) == {"sales": 60.0, "purchases": 30.0}


def test_negative_prices_make_sales_and_purchases_negative() -> None:
    result = one_store([-2.0, 1.0], window=window([-10.0, -5.0]))
    assert money(result.totals) == {"sales": -5.0, "purchases": -20.0}
    assert result.margin == 15.0


def test_a_site_is_settled_on_its_net_power_and_each_meter_on_its_own() -> None:
    market = window(buy_price_per_mwh=[40.0], sell_price_per_mwh=[30.0])
    assets = [store(site="quay"), store("quay-b2", site="quay"), store("mole-b1")]
    result = audit(
        job(assets, market, sites=[{"id": "quay"}]), {"quay-b1": [2.0], "quay-b2": [-1.5], "mole-b1": [-1.0]}
    )
    # The quay sells 0.5 MW at 30, the mole buys 1 MW at 40: nothing is netted between meters.
    assert money(result.totals) == {"sales": 15.0, "purchases": 40.0}
    assert [(site.totals.sales, site.totals.purchases) for site in result.sites] == [(15.0, 0.0), (0.0, 40.0)]
    assert (result.fleet.totals.sales, result.fleet.totals.purchases) == (0.0, 0.0)


def test_settled_as_a_fleet_meters_are_netted_and_the_money_stands_at_the_fleet() -> None:
    market = window(buy_price_per_mwh=[40.0], sell_price_per_mwh=[30.0], settled_at="fleet")
    assets = [store(site="quay"), store("mole-b1")]
    sites = [{"id": "quay", "export_fee_per_mwh": 2.0}]
    document = job(assets, market, sites=sites, positions={"fleet": 0.25})
    result = audit(document, {"quay-b1": [2.0], "mole-b1": [-1.0]})
    # 1 MW net less 0.25 MW sold already leaves 0.75 MWh at 30; the fee follows the site's own 2 MWh.
    assert money(result.totals) == {"sales": 22.5, "fees": 4.0}
    assert result.fleet.totals.sales == 22.5
    assert [site.totals.sales for site in result.sites] == [0.0, 0.0]
    assert result.sites[0].totals.fees == 4.0
    assert result.margin == 18.5


def test_what_the_fleet_buys_as_one_stands_at_the_fleet() -> None:
    market = window(buy_price_per_mwh=[40.0], sell_price_per_mwh=[30.0], settled_at="fleet")
    result = audit(job([store(), store("mole-b1")], market), {"quay-b1": [-2.0], "mole-b1": [0.5]})
    # 1.5 MW net at 40.
    assert money(result.totals) == {"purchases": 60.0}
    assert (result.fleet.totals.purchases, result.margin) == (60.0, -60.0)


@pytest.mark.parametrize(
    ("power", "position", "sales", "purchases"),
    [
        (2.0, 1.5, 15.0, 0.0),
        (1.0, 1.5, 0.0, 20.0),
        (0.0, 1.5, 0.0, 60.0),
        (-1.0, -1.5, 15.0, 0.0),
        (1.0, 1.0, 0.0, 0.0),
    ],
)
def test_only_what_differs_from_the_position_is_traded(
    power: float, position: float, sales: float, purchases: float
) -> None:
    market = window(buy_price_per_mwh=[40.0], sell_price_per_mwh=[30.0])
    result = one_store([power], window=market, positions={"quay-b1": [position]})
    assert (result.totals.sales, result.totals.purchases) == (sales, purchases)


def test_a_position_is_keyed_by_the_meter() -> None:
    document = job([store(site="quay")], window([30.0]), sites=[{"id": "quay"}], positions={"quay": 1.0})
    assert audit(document, {"quay-b1": [1.5]}).totals.sales == 15.0


def test_fees_follow_metered_power_not_the_position() -> None:
    sites = [{"id": "quay", "import_fee_per_mwh": 3.0, "export_fee_per_mwh": 2.0}]
    assets = [store(site="quay", standby_load_mw=0.5)]
    document = job(assets, window([0.0] * 3), sites=sites, positions={"quay": [5.0, 5.0, 5.0]})
    result = audit(document, {"quay-b1": [1.5, -1.5, 0.0]})
    # Exported 1 MWh at 2; imported 2 MWh and 0.5 MWh of standby load at 3.
    assert money(result.totals) == {"fees": 9.5}
    assert result.sites[0].totals.fees == 9.5
    assert result.margin == -9.5


def test_a_little_exported_lowers_no_import_fee() -> None:
    sites = [{"id": "quay", "import_fee_per_mwh": 3.0}]
    document = job([store(site="quay")], window([0.0] * 2), sites=sites)
    # 1 MWh imported at 3; the 0.5 MWh exported pay nothing and give nothing back.
    assert audit(document, {"quay-b1": [-1.0, 0.5]}).totals.fees == 3.0


@pytest.mark.parametrize(("before", "charge"), [(None, 250.0), (1.0, 150.0), (2.5, 0.0), (4.0, 0.0)])
def test_the_peak_is_charged_where_it_passes_the_months_so_far(before: float | None, charge: float) -> None:
    counted = {} if before is None else {"sites": {"quay": {"peak_import_mw": before}}}
    sites = [{"id": "quay", "peak_import_charge_per_mw": 100.0}]
    assets = [store(site="quay"), load(site="quay")]
    document = job(
        assets, window([0.0, 0.0]), sites=sites, forecasts={"quay-cranes": [0.5, 1.0]}, counted_before=counted
    )
    result = audit(document, {"quay-b1": [-2.0, -1.0]})
    assert money(result.totals) == ({"peak_import_charge": charge} if charge else {})
    assert result.margin == -charge


def test_a_site_that_only_exports_has_no_peak() -> None:
    document = job([store(site="quay")], window([0.0]), sites=[{"id": "quay", "peak_import_charge_per_mw": 100.0}])
    assert audit(document, {"quay-b1": [1.0]}).margin == 0.0


def test_wear_is_paid_per_mwh_discharged_at_the_terminals() -> None:
    asset = store(wear_cost_per_mwh=4.0, discharge_efficiency=0.5)
    result = one_store([1.0, -2.0, 0.5], asset=asset, window=window([0.0] * 3, interval="PT30M"))
    assert result.assets[0].totals.wear_cost == 3.0
    assert money(result.totals) == {"wear_cost": 3.0}
    assert result.margin == -3.0


def test_what_is_left_above_the_final_target_has_a_value() -> None:
    targets = {"quay-b1": {"final_stored_mwh": 4.0, "final_value_per_mwh": 20.0}}
    result = one_store([-1.0], targets=targets)
    assert money(result.totals) == {"final_energy_value": 40.0}
    assert result.assets[0].totals.final_energy_value == 40.0
    assert result.margin == 40.0


def test_a_value_without_a_target_counts_from_what_an_idle_store_would_have_left() -> None:
    asset = store(self_discharge_per_hour=0.1)
    result = one_store([-1.0], asset=asset, targets={"quay-b1": {"final_value_per_mwh": 20.0}})
    # 5 * 0.9 + 1 = 5.5 against 4.5.
    assert result.totals.final_energy_value == pytest.approx(20.0)


def test_a_breach_of_the_target_costs_its_value() -> None:
    targets = {"quay-b1": {"final_stored_mwh": 5.0, "final_value_per_mwh": 20.0}}
    result = one_store([1.0], targets=targets)
    assert broken(result) == ["final_stored"]
    assert result.totals.final_energy_value == -20.0


def test_totals_of_assets_meters_and_fleet_add_up_and_the_margin_with_them() -> None:
    sites = [{"id": "quay", "import_fee_per_mwh": 1.5, "export_fee_per_mwh": 0.5, "peak_import_charge_per_mw": 7.0}]
    assets = [store(site="quay", wear_cost_per_mwh=3.0), load(site="quay"), store("mole-b1", standby_load_mw=0.1)]
    promise = {
        "id": "firm",
        "kind": "hours_at_least",
        "applies_to": {"site": "quay"},
        "threshold": {"mw": 1.0},
        "hours": 2.0,
        "shortfall_price_per_hour": 11.0,
    }
    document = job(
        assets,
        window([31.7, -4.1, 77.3]),
        sites=sites,
        forecasts={"quay-cranes": 0.3},
        targets={"quay-b1": {"final_stored_mwh": 3.0, "final_value_per_mwh": 13.0}},
        commitments=[promise],
    )
    result = audit(document, {"quay-b1": [-1.1, -1.7, 1.9], "mole-b1": [0.7, -0.9, 0.3]})
    assert broken(result) == []
    parts = [asset.totals.model_dump() for asset in result.assets]
    parts += [site.totals.model_dump() for site in result.sites]
    parts.append(result.fleet.totals.model_dump())
    for name, total in result.totals.model_dump().items():
        if name != "shortfall_cost":
            assert total == pytest.approx(fsum(part.get(name, 0.0) for part in parts)), name
    # By hand. Quay: -1.4, -2, 1.6 MW; mole: 0.6, -1, 0.2 MW.
    assert result.totals.sales == pytest.approx(1.6 * 77.3 + 0.6 * 31.7 + 0.2 * 77.3)
    assert result.totals.purchases == pytest.approx(1.4 * 31.7 - 2 * 4.1 - 1 * 4.1)
    assert result.totals.fees == pytest.approx(1.5 * 3.4 + 0.5 * 1.6)
    assert result.totals.peak_import_charge == pytest.approx(7.0 * 2.0)
    assert result.totals.wear_cost == pytest.approx(3.0 * 1.9)
    assert result.totals.final_energy_value == pytest.approx(13.0 * (5.0 + 1.1 + 1.7 - 1.9 - 3.0))
    assert result.totals.shortfall_cost == pytest.approx(11.0)
    by_hand = 158.16 - 32.08 - 5.9 - 14.0 - 5.7 + 37.7 - 11.0
    assert result.totals.sales == pytest.approx(158.16)
    assert result.totals.purchases == pytest.approx(32.08)
    assert result.margin == pytest.approx(by_hand)


@pytest.mark.parametrize(
    ("power", "optimum", "from_hour"),
    [([-1, -1, 0, 1, 1, 0], "free", None), ([-1, -1, 0, 1, 0.5, 0.5], "min_0.5MW_hours_4_5_6", 3)],
)
def test_the_best_schedules_of_a_small_store_earn_what_enumeration_found(
    power: list[float], optimum: str, from_hour: int | None
) -> None:
    # reference/storage_small.json: own instance, checked by MILP and by enumeration; no published figure.
    prices = STORAGE_SMALL["commitment_prices_EUR_per_MWh"]
    battery = store(discharge_limit_mw=1.0, charge_limit_mw=1.0, energy_capacity_mwh=2.0)
    members: dict[str, Any] = {"initial": {"quay-b1": {"stored_mwh": 0.0}}}
    if from_hour is not None:
        promise = {"id": "firm", "kind": "hours_at_least", "applies_to": {"assets": ["quay-b1"]}, "hours": 3.0}
        promise |= {"threshold": {"fraction_of_rated": 0.5}, "from": f"2027-03-10T0{from_hour}:00:00Z"}
        members["commitments"] = [promise]
    result = one_store([float(mw) for mw in power], asset=battery, window=window(prices), **members)
    assert broken(result) == []
    assert result.margin == STORAGE_SMALL["optimum"][optimum]


def test_an_unlimited_store_shaves_the_peak_to_the_mean() -> None:
    # reference/storage_small.json: own instance, checked by LP against water-filling; no published figure.
    drawn = [float(mw) for mw in STORAGE_SMALL["peak_shaving"]["load_MW"]]
    mean = STORAGE_SMALL["peak_shaving"]["unlimited"]
    big = store(site="quay", discharge_limit_mw=10.0, charge_limit_mw=10.0, energy_capacity_mwh=100.0)
    document = job(
        [big, load(site="quay")],
        window([0.0] * len(drawn)),
        sites=[{"id": "quay", "peak_import_charge_per_mw": 1.0}],
        forecasts={"quay-cranes": drawn},
        initial={"quay-b1": {"stored_mwh": 50.0}},
        targets={"quay-b1": None},
    )
    result = audit(document, {"quay-b1": [mw - mean for mw in drawn]})
    assert broken(result) == []
    assert result.totals.peak_import_charge == pytest.approx(mean)
