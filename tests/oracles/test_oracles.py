"""Check the oracle against published and closed-form results, and against solvers of another kind."""

from __future__ import annotations

import json
import math
import random
from datetime import date, timedelta
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import pandas as pd
import pytest
import tsdata

from tests.oracles.classic import network_flow_margin, sum_of_increments, warehouse_value
from tests.oracles.formulation import Answer, solve
from tests.oracles.formulation_clock import Job, read_clock

REFERENCE = Path(__file__).parents[1] / "reference"
# Own small instances, each checked by closed form and by MILP or enumeration when they were written down.
SMALL: dict[str, Any] = json.loads((REFERENCE / "storage_small.json").read_text())


def store(**changes: Any) -> dict[str, Any]:
    """Return a lossless 1 MW, 2 MWh store with `changes`."""
    plain = {"id": "wharf-b1", "kind": "storage", "discharge_limit_mw": 1.0, "charge_limit_mw": 1.0}
    return plain | {"energy_capacity_mwh": 2.0, "charge_efficiency": 1.0, "discharge_efficiency": 1.0} | changes


def job(prices: Any, *assets: dict[str, Any], stored: float = 0.0, final: float = 0.0, **members: Any) -> Job:
    """Return a job over hourly prices; every store starts with `stored` and ends with at least `final`."""
    stores = [asset["id"] for asset in assets if asset["kind"] == "storage"]
    window = {"start": "2027-02-09T00:00:00+00:00", "interval": "PT1H", "timezone": "UTC", "currency": "EUR"}
    return {
        "fleet": {"assets": list(assets)},
        "window": window | {"price_per_mwh": list(prices)},
        "initial": {asset_id: {"stored_mwh": stored} for asset_id in stores},
        "targets": {asset_id: {"final_stored_mwh": final} for asset_id in stores},
    } | members


def margin_of(request: Job) -> float:
    """Return the optimal margin of a request that has one."""
    answer = solve(request, gap=1e-9)
    assert answer.outcome == "optimal"
    assert answer.margin is not None
    assert answer.bound is not None
    assert answer.bound >= answer.margin
    return answer.margin


def holding(first: int, last: int) -> Answer:
    """Return the answer where at least 0.5 MW is owed in every hour first..last, hour 1 being the first."""
    commitment = {
        "id": "firm-1",
        "kind": "hours_at_least",
        "applies_to": {"assets": ["wharf-b1"]},
        "threshold": {"fraction_of_rated": 0.5},
        "hours": last - first + 1,
        "from": f"2027-02-09T{first - 1:02d}:00:00+00:00",
        "to": f"2027-02-09T{last:02d}:00:00+00:00",
    }
    return solve(job(SMALL["commitment_prices_EUR_per_MWh"], store(), commitments=[commitment]), gap=1e-9)


def test_free_store_earns_the_reference_margin() -> None:
    margin = margin_of(job(SMALL["commitment_prices_EUR_per_MWh"], store()))
    assert margin == pytest.approx(SMALL["optimum"]["free"], abs=1e-6)


@pytest.mark.parametrize(("first", "key"), [(4, "min_0.5MW_hours_4_5_6"), (3, "min_0.5MW_hours_3_to_6")])
def test_held_hours_cost_what_the_reference_says(first: int, key: str) -> None:
    answer = holding(first, 6)
    assert answer.outcome == "optimal"
    assert answer.margin == pytest.approx(SMALL["optimum"][key], abs=1e-6)


def test_five_held_hours_after_one_of_charging_are_infeasible() -> None:
    assert SMALL["optimum"]["min_0.5MW_hours_2_to_6"] == "infeasible"
    assert holding(2, 6).outcome == "infeasible"


def test_store_idles_below_the_break_even_ratio_and_earns_above_it() -> None:
    reference = SMALL["efficiency_break_even"]
    each_way = math.sqrt(reference["round_trip"])
    lossy = store(charge_efficiency=each_way, discharge_efficiency=each_way)
    assert reference["break_even_price_ratio"] == pytest.approx(1 / reference["round_trip"])
    assert margin_of(job([50.0, 58.0], lossy)) == pytest.approx(0.0, abs=1e-9)
    assert margin_of(job([50.0, 58.25], lossy)) == pytest.approx(0.095, abs=1e-9)
    assert margin_of(job(reference["prices"], lossy)) == pytest.approx(reference["profit"], abs=1e-9)


def test_full_store_earns_nothing_from_a_negative_price() -> None:
    reference = SMALL["negative_price_trap"]
    trap = store(energy_capacity_mwh=1.0, charge_efficiency=0.9, discharge_efficiency=0.9)
    full = job([reference["price"]], trap, stored=1.0, final=1.0)
    # With charging and discharging at once a relaxation would earn 50 * (1 - 0.81).
    assert reference["lp_without_exclusivity"] == pytest.approx(50 * (1 - 0.81))
    assert margin_of(full) == pytest.approx(reference["milp"], abs=1e-6)


@pytest.mark.parametrize(
    ("power", "energy", "stored", "key"),
    [(3.0, 4.0, None, "P3_E4"), (2.0, 4.0, None, "P2_E4"), (100.0, 100.0, 50.0, "unlimited")],
)
def test_peak_shaving_reaches_the_reference_peak(power: float, energy: float, stored: float | None, key: str) -> None:
    reference = SMALL["peak_shaving"]
    shaver = store(discharge_limit_mw=power, charge_limit_mw=power, energy_capacity_mwh=energy, site="mill")
    load = {"id": "mill-base", "kind": "fixed_load", "site": "mill"}
    # A cyclic end with a free start: the best of all starts, tried on a grid that holds the best one.
    starts = [energy * n / 8 for n in range(9)] if stored is None else [stored]
    peaks = []
    for start in starts:
        request = job([0.0] * 8, shaver, load, stored=start, final=start, forecasts={"mill-base": reference["load_MW"]})
        request["fleet"]["sites"] = [{"id": "mill", "peak_import_charge_per_mw": 1.0}]
        peaks.append(-margin_of(request))
    assert min(peaks) == pytest.approx(reference[key], abs=1e-6)


def test_dreyfus_recursion_gives_the_textbook_warehouse_value() -> None:
    # G. B. Dantzig, Linear Programming and Extensions, 1963, ch. 3.6 (public model-library file WHOUSE): prices
    # 10 12 8 9, stock 50, capacity 100, storage 1 per unit and period on closing stock; least cost -600.
    prices = [10.0, 12.0, 8.0, 9.0]
    assert warehouse_value(prices, prices, capacity=100.0, holding_cost=1.0).at(50.0) == pytest.approx(600.0)


@pytest.mark.parametrize("seed", range(40))
def test_oracle_agrees_with_the_dreyfus_recursion(seed: int) -> None:
    # Dreyfus 1957 (see `classic`): no power limit, so a limit of twice the capacity in an hour is as good as none.
    draw = random.Random(seed)
    count, capacity = draw.randint(2, 14), draw.randint(1, 12)
    buy = [draw.uniform(5, 100) for _ in range(count)]
    sell = [price - draw.choice([0.0, draw.uniform(0, 20)]) for price in buy]
    warehouse = store(energy_capacity_mwh=capacity, charge_limit_mw=2 * capacity, discharge_limit_mw=2 * capacity)
    opening = capacity * draw.random()
    request = job([], warehouse, stored=opening)
    del request["window"]["price_per_mwh"]
    request["window"] |= {"buy_price_per_mwh": buy, "sell_price_per_mwh": sell}
    expected = warehouse_value(buy, sell, capacity=float(capacity)).at(opening)
    assert margin_of(request) == pytest.approx(expected, rel=1e-7, abs=1e-6)


@pytest.mark.parametrize("seed", range(30))
def test_oracle_agrees_with_the_sum_of_positive_increments(seed: int) -> None:
    draw = random.Random(seed)
    prices = [draw.uniform(0, 90) for _ in range(draw.randint(2, 24))]
    energy = draw.uniform(0.5, 9.0)
    quick = store(energy_capacity_mwh=energy, charge_limit_mw=energy, discharge_limit_mw=energy)
    assert margin_of(job(prices, quick)) == pytest.approx(sum_of_increments(prices, energy), rel=1e-7, abs=1e-6)


@pytest.mark.parametrize("seed", range(60))
def test_oracle_agrees_with_network_simplex(seed: int) -> None:
    draw = random.Random(seed)
    prices = [draw.randint(-20, 90) for _ in range(draw.randint(3, 14))]
    power, capacity = draw.randint(1, 4), draw.randint(1, 10)
    opening, final = draw.randint(0, capacity), draw.randint(0, capacity)
    expected = network_flow_margin(prices, power_mwh=power, capacity_mwh=capacity, opening_mwh=opening, final_mwh=final)
    lossless = store(energy_capacity_mwh=capacity, charge_limit_mw=power, discharge_limit_mw=power)
    answer = solve(job(prices, lossless, stored=opening, final=final), gap=1e-9)
    assert (answer.outcome == "infeasible") == (expected is None)
    assert answer.margin == (None if expected is None else pytest.approx(expected, rel=1e-7, abs=1e-6))


def open_prices() -> Any:
    """Return the hourly prices of the open data set the reference values were computed on, one row an hour."""
    return pd.read_csv(Path(tsdata.__file__).parent / "fpppy" / "electricity_short.csv")


@pytest.mark.parametrize("day", ["2018-10-15", "2018-10-28"])
def test_oracle_agrees_with_the_reference_on_open_prices(day: str) -> None:
    reference = json.loads((REFERENCE / "open_price_checks.json").read_text())["days"][day]
    table = open_prices()
    prices = [float(y) for y in table["y"][table["ds"].astype(str).str.startswith(day)]]
    assert len(prices) == 24
    each_way = math.sqrt(0.86)
    lossy = store(charge_efficiency=each_way, discharge_efficiency=each_way)
    assert margin_of(job(prices, store(energy_capacity_mwh=1.0))) == pytest.approx(reference["lossless_1MW_1MWh"])
    assert margin_of(job(prices, store())) == pytest.approx(reference["lossless_1MW_2MWh"])
    assert margin_of(job(prices, lossy)) == pytest.approx(reference["rte086_1MW_2MWh"], abs=1e-5)


def day_lengths() -> list[tuple[str, str, int]]:
    """Return (zone, day, quarter-hours) of the reference.

    Source: computed with zoneinfo; the days of 46, 48 and 50 settlement periods in Great Britain are also Elexon's.
    """
    table = json.loads((REFERENCE / "day_lengths.json").read_text())
    return [
        (zone, day, found[0] if isinstance(found, list) else found)
        for zone, days in table.items()
        if not zone.startswith("_")
        for day, found in days.items()
    ]


@pytest.mark.parametrize(("zone", "day", "quarters"), day_lengths())
def test_local_days_have_the_reference_number_of_quarter_hours(zone: str, day: str, quarters: int) -> None:
    before = date.fromisoformat(day) - timedelta(days=1)
    offset = pd.Timestamp(before.isoformat(), tz=ZoneInfo(zone)).isoformat()
    window = {"start": offset, "interval": "PT15M", "timezone": zone, "price_per_mwh": [0.0] * 300}
    assert len(read_clock(window).days()[date.fromisoformat(day)]) == quarters


def test_energy_just_above_capacity_is_taken_to_the_capacity_and_more_is_refused() -> None:
    quick = store(discharge_limit_mw=3.0)
    assert margin_of(job([10.0], quick, stored=2.03)) == pytest.approx(20.0)
    with pytest.raises(ValueError, match="2 % above"):
        solve(job([10.0], quick, stored=2.05))


@pytest.mark.parametrize(("hours_in_state", "owed"), [(1, 2), (2, 1), (3, 0)])
def test_run_under_way_at_the_start_is_run_to_its_minimum(hours_in_state: int, owed: int) -> None:
    running = store(min_charge_mw=0.5, min_discharge_mw=0.5, min_run_hours=3)
    request = job([-10.0] * 4, running, stored=2.0)
    # A rest longer than the window keeps it from being paid to charge afterwards.
    running["min_rest_hours"] = 9
    request["initial"]["wharf-b1"] |= {"power_mw": 1.0, "hours_in_state": hours_in_state}
    assert margin_of(request) == pytest.approx(-5.0 * owed)


def test_ramp_does_not_bind_into_an_outage_and_binds_out_of_it() -> None:
    slow = store(ramp_mw_per_hour=0.5)
    request = job([10.0, 10.0, 10.0], slow, stored=2.0)
    request["initial"]["wharf-b1"]["power_mw"] = 1.0
    # From 1 MW a ramp of 0.5 MW/h lets it go on at 1 MW: 2 MWh are sold.
    assert margin_of(request) == pytest.approx(20.0)
    outage = {"asset": "wharf-b1", "kind": "forced", "from": "2027-02-08T12:00:00Z", "to": "2027-02-09T00:20:00Z"}
    request["outages"] = [outage | {"available_fraction": 0.0}]
    # Tripped to 0 in the first hour, it comes back by 0.5 MW each hour.
    assert margin_of(request) == pytest.approx(15.0)
