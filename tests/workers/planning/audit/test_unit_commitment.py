"""The published ten-unit day as an islanded site: its best schedule costs what is published, to the dollar.

Kazarlis, Bakirtzis and Petridis, A genetic algorithm solution to the unit commitment problem, IEEE Transactions on
Power Systems 11(1), 1996: ten units, 24 hours, 10 % reserve; best published cost 563,938. Table, commitment and
dispatch are those of tests/reference/unit_commitment_ten_units.json, which says where each figure comes from.
"""

import json
from pathlib import Path
from typing import Any

import pytest

from tests.workers.planning.audit.small_jobs import (
    Document,
    audit_decisions,
    broken,
    generator,
    job,
    load,
    only,
    product,
    window,
)
from workers.planning.audit import Decision

FILE = Path(__file__).parents[3] / "reference" / "unit_commitment_ten_units.json"
HOURS = 24


def name(unit: int) -> str:
    return f"g{unit}"


@pytest.fixture(scope="module")
def reference() -> Any:
    return json.loads(FILE.read_text(encoding="utf-8"))


def plant(unit: Any) -> Document:
    """Return a unit of the table; cold is a start after more than minimum down time and `cold_start_h` off."""
    cold_after = unit["min_down_h"] + unit["cold_start_h"] + 1
    return generator(
        name(unit["unit"]),
        site="island",
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


def state(unit: Any, first_mw: float) -> Document:
    """Return a unit's state before the day; what it gave is in no table, and without ramps does not matter."""
    hours = unit["init_status_h"]
    return (
        {"on": True, "output_mw": first_mw, "hours_in_state": hours}
        if hours > 0
        else {"on": False, "hours_in_state": -hours}
    )


def ten_units(reference: Any) -> Document:
    first = reference["optimal_10_dispatch_MW_by_hour"][0]
    states = {name(unit["unit"]): state(unit, mw) for unit, mw in zip(reference["units"], first, strict=True)}
    spinning = {
        "id": "spinning",
        "kind": "reserve_holding",
        "applies_to": {"site": "island"},
        "product": "up-15",
        "power_mw": [reference["reserve_fraction"] * mw for mw in reference["load_MW"]],
    }
    return job(
        [*(plant(unit) for unit in reference["units"]), load("town", site="island")],
        window([0.0] * HOURS, reserve_products=[product()]),
        sites=[{"id": "island", "export_limit_mw": 0.0, "import_limit_mw": 0.0}],
        forecasts={"town": reference["load_MW"]},
        initial=states,
        commitments=[spinning],
    )


def best(reference: Any) -> dict[str, Decision]:
    """Return the published best commitment with its dispatch; what is left of each unit that is on is reserve."""
    decisions = {}
    for k, unit in enumerate(reference["units"]):
        power = [float(hour[k]) for hour in reference["optimal_10_dispatch_MW_by_hour"]]
        on = [mark == "1" for mark in reference["optimal_10_commitment"][str(unit["unit"])]]
        spare = [unit["pmax_MW"] - mw if is_on else 0.0 for mw, is_on in zip(power, on, strict=True)]
        decisions[name(unit["unit"])] = Decision(power, on, {"up-15": spare})
    return decisions


def test_the_published_best_day_holds_every_rule_and_costs_what_is_published(reference: Any) -> None:
    result = audit_decisions(ten_units(reference), best(reference))
    assert broken(result) == []
    assert round(result.totals.fuel_cost + result.totals.start_cost) == 563_938
    assert result.totals.start_cost == sum(start["usd"] for start in reference["optimal_10_starts"]) == 4_090.0
    # The file prints four decimals.
    assert result.totals.fuel_cost == pytest.approx(559_847.6875, abs=5e-5)
    assert result.margin == pytest.approx(-563_937.6875, abs=5e-5)


def test_each_unit_starts_as_often_and_as_cold_as_published(reference: Any) -> None:
    result = audit_decisions(ten_units(reference), best(reference))
    for asset in result.assets[:10]:
        starts = [start["usd"] for start in reference["optimal_10_starts"] if name(start["unit"]) == asset.id]
        assert asset.totals.start_cost == sum(starts)


def test_a_unit_left_out_at_the_peak_leaves_load_and_reserve_short(reference: Any) -> None:
    decisions = best(reference)
    decisions["g10"] = Decision([0.0] * HOURS)
    result = audit_decisions(ten_units(reference), decisions)
    assert broken(result) == ["import_limit", "reserve_holding"]
    # 10 MW of load; 162 MW were spare where 150 are due, 45 of them of the unit that is left out.
    assert [violation.amount for violation in result.verification.violations] == [10.0, 33.0]


def test_a_unit_that_stops_an_hour_early_breaks_its_minimum_up_time(reference: Any) -> None:
    decisions = best(reference)
    late = decisions["g6"]
    assert late.on is not None
    # Its last run has four hours of at least three: two are too few.
    stopped = [is_on and hour not in {21, 22} for hour, is_on in enumerate(late.on)]
    power = [mw if is_on else 0.0 for mw, is_on in zip(late.power_mw, stopped, strict=True)]
    alone = {**ten_units(reference), "commitments": []}
    alone["fleet"] = {
        "assets": [asset for asset in alone["fleet"]["assets"] if asset["id"] == "g6"],
        "sites": [{"id": "island"}],
    }
    alone["forecasts"] = {}
    alone["initial"] = {"g6": alone["initial"]["g6"]}
    found = only(audit_decisions(alone, {"g6": Decision(power, stopped)}))
    assert (found.rule, found.asset, found.amount) == ("min_up", "g6", 1.0)
