"""Published unit commitment as an islanded site: cost to the cent where it is proven, brackets where it is not.

Kazarlis, Bakirtzis and Petridis, A genetic algorithm solution to the unit commitment problem, IEEE Transactions on
Power Systems 11(1), 1996: ten units, 24 hours, 10 % reserve; larger systems repeat the units and scale the load. Best
published cost of ten units 563,938. Tables, other optima and proven bounds are those of
tests/reference/unit_commitment_ten_units.json, which says where each figure comes from.
"""

import json
from pathlib import Path
from typing import Any

import pytest

from schemas.schedule import Schedule
from tests.workers.planning.jobs import answer, generator, job, planned, product

Document = dict[str, Any]

FILE = Path(__file__).parents[2] / "reference" / "unit_commitment_ten_units.json"
REFERENCE: dict[str, Any] = json.loads(FILE.read_text(encoding="utf-8"))
FOUND: dict[str, Any] = REFERENCE["verified_here"]
HOURS = 24
CENT = 0.01


def plant(name: str, unit: Document) -> Document:
    """Return a unit of the table; a start after more than minimum down time and `cold_start_h` hours off is cold."""
    cold_after = unit["min_down_h"] + unit["cold_start_h"] + 1
    return generator(
        name,
        site="isle",
        min_output_mw=unit["pmin_MW"],
        max_output_mw=unit["pmax_MW"],
        cost={
            "constant_per_hour": unit["a_usd_per_h"],
            "linear_per_mwh": unit["b_usd_per_MWh"],
            "quadratic_per_mw2h": unit["c_usd_per_MW2h"],
        },
        start_costs=[
            {"after_hours_off": 0.0, "cost": unit["hot_start_usd"]},
            {"after_hours_off": cold_after, "cost": unit["cold_start_usd"]},
        ],
        min_up_hours=unit["min_up_h"],
        min_down_hours=unit["min_down_h"],
    )


def system(units: int, reserve: float, **members: Any) -> Document:
    """Return the day of so many units, a multiple of ten, with reserve as a share of the load."""
    times = units // 10
    plants, initial = [], {}
    for copy in range(times):
        for unit in REFERENCE["units"]:
            name, hours_before = f"g{unit['unit']}-{copy + 1}", unit["init_status_h"]
            plants.append(plant(name, unit))
            initial[name] = {"on": hours_before > 0, "hours_in_state": abs(hours_before)}
    load = [float(mw * times) for mw in REFERENCE["load_MW"]]
    document = job(
        [0.0] * HOURS,
        {"id": "town", "kind": "fixed_load", "site": "isle"},
        *plants,
        sites=[{"id": "isle", "export_limit_mw": 0.0, "import_limit_mw": 0.0}],
        forecasts={"town": load},
        window={"currency": "USD", "reserve_products": [product("spinning", sustain_minutes=0.0)] if reserve else []},
        relative_gap=1e-4,
    )
    if reserve:
        held = {"id": "spare", "kind": "reserve_holding", "applies_to": {"fleet": True}, "product": "spinning"}
        document["commitments"] = [held | {"power_mw": [reserve * mw for mw in load]}]
    return document | {"initial": initial} | members


def costs(found: Schedule) -> tuple[float, float]:
    """Return the proven lower bound of the cost and the cost of the schedule: nothing is sold, so cost is -margin."""
    assert found.totals.sales == found.totals.purchases == 0.0
    assert found.margin == pytest.approx(-found.totals.fuel_cost - found.totals.start_cost)
    assert found.margin_bound is not None
    return -found.margin_bound, -found.margin


@pytest.fixture(scope="module")
def ten_units() -> Schedule:
    return planned(system(10, REFERENCE["reserve_fraction"], relative_gap=1e-6))


def test_ten_units_cost_what_is_published_with_a_proof(ten_units: Schedule) -> None:
    proven, cost = costs(ten_units)
    assert cost == pytest.approx(FOUND["10"]["total_usd"], abs=CENT)
    assert round(cost) == 563_938
    assert cost - proven <= 1e-4 * cost


@pytest.mark.parametrize(("reserve", "case"), [(0.05, "10_reserve_5pct"), (0.0, "10_no_reserve")])
def test_ten_units_cost_less_with_less_reserve(reserve: float, case: str) -> None:
    proven, cost = costs(planned(system(10, reserve, relative_gap=1e-6)))
    assert cost == pytest.approx(FOUND[case]["total_usd"], abs=CENT)
    assert cost - proven <= 1e-4 * cost


def test_ten_units_start_and_run_as_in_the_best_schedule_known(ten_units: Schedule) -> None:
    on = {entry.id: entry.on for entry in ten_units.assets if entry.on is not None}
    for unit, hours_on in REFERENCE["optimal_10_commitment"].items():
        assert "".join("01"[is_on] for is_on in on[f"g{unit}-1"]) == hours_on
    assert ten_units.totals.start_cost == pytest.approx(FOUND["10"]["startup_usd"])


@pytest.mark.full
def test_ten_units_by_cp_sat_are_bracketed() -> None:
    found = answer(system(10, REFERENCE["reserve_fraction"], method="cp_sat", time_limit_seconds=60))
    assert isinstance(found, Schedule)
    proven, cost = costs(found)
    assert proven <= FOUND["10"]["total_usd"] + CENT
    assert cost >= FOUND["10"]["total_usd"] - CENT


@pytest.mark.full
def test_forty_units_come_within_five_hundredths_of_a_percent_of_the_best_known() -> None:
    known = FOUND["40"]
    proven, cost = costs(planned(system(40, REFERENCE["reserve_fraction"], time_limit_seconds=120)))
    assert cost <= known["total_usd"] * 1.0005
    assert proven >= known["proved_lower_bound_usd"] * 0.9995
    assert proven <= known["total_usd"]
    assert cost >= known["proved_lower_bound_usd"]


@pytest.mark.full
def test_a_hundred_units_come_within_a_tenth_of_a_percent_of_the_bracket() -> None:
    known = FOUND["100"]
    proven, cost = costs(planned(system(100, REFERENCE["reserve_fraction"], time_limit_seconds=300)))
    assert known["proved_lower_bound_usd"] <= cost <= known["feasible_total_usd"] * 1.001
    assert known["proved_lower_bound_usd"] * 0.999 <= proven <= known["feasible_total_usd"]
