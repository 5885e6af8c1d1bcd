"""Output limits and fuel cost of a generator, in hourly intervals where nothing else is said."""

import math
from typing import Any

import pytest

from tests.workers.planning.audit.small_jobs import (
    Document,
    audit,
    audit_decisions,
    broken,
    facts,
    generator,
    job,
    load,
    one_generator,
    only,
    outage,
    product,
    window,
)
from workers.planning.audit import Decision


def test_a_generator_runs_between_its_minimum_and_maximum_output() -> None:
    assert broken(one_generator([1.0, 4.0])) == []
    found = only(one_generator([1.0, 4.1]))
    assert (found.rule, found.pointer, found.asset, found.unit) == (
        "max_output",
        "/fleet/assets/0/max_output_mw",
        "quay-g1",
        "MW",
    )
    assert found.amount == pytest.approx(0.1)
    found = only(one_generator([0.75, 4.0]))
    assert (found.rule, found.pointer, found.amount) == ("min_output", "/fleet/assets/0/min_output_mw", 0.25)


def test_a_generator_that_is_off_gives_nothing() -> None:
    assert broken(one_generator([0.0, 1.0], [False, True])) == []
    assert broken(one_generator([1e-6, 1.0], [False, True])) == []
    for power in (0.5, -0.5):
        found = only(one_generator([power, 1.0], [False, True]))
        assert (found.rule, found.pointer, found.amount) == ("off_with_output", "/fleet/assets/0", 0.5)


def test_a_generator_that_is_on_gives_its_minimum_output() -> None:
    found = only(one_generator([0.0], [True]))
    assert (found.rule, found.amount) == ("min_output", 1.0)
    assert broken(one_generator([0.0], [True], asset=generator(min_output_mw=0.0))) == []


def test_without_on_a_generator_is_on_above_a_millionth_of_a_mw() -> None:
    assert one_generator([1.0, 0.0, 1e-6, 2e-6], asset=generator(min_output_mw=0.0)).assets[0].on == [
        True,
        False,
        False,
        True,
    ]


def test_an_outage_lowers_the_maximum_and_not_the_minimum() -> None:
    outages = [outage("quay-g1", 1, 2, 0.5)]
    assert broken(one_generator([4.0, 2.0, 4.0], outages=outages)) == []
    found = only(one_generator([4.0, 2.5, 4.0], outages=outages))
    assert (found.rule, found.pointer, found.amount) == ("max_output", "/outages/0", 0.5)
    assert "forced outage" in found.text
    assert broken(one_generator([4.0, 0.5, 4.0], outages=outages)) == ["min_output"]


def test_where_less_than_the_minimum_is_left_a_generator_is_off() -> None:
    assert broken(one_generator([1.0], outages=[outage("quay-g1", 0, None, 0.25)])) == []
    outages = [outage("quay-g1", 0, None, 0.2)]
    assert broken(one_generator([0.0], outages=outages)) == []
    found = only(one_generator([0.8], outages=outages))
    assert (found.rule, found.pointer, found.amount, found.unit) == ("must_be_off", "/outages/0", 1.0, "intervals")
    assert broken(one_generator([0.0], [True], outages=[outage("quay-g1", 0, None)])) == ["must_be_off"]


def test_where_it_must_be_off_its_output_is_no_breach_of_its_own() -> None:
    # 0.8 MW are left, less than the 1 MW it needs: 2 MW there break one rule, not two.
    assert broken(one_generator([2.0], outages=[outage("quay-g1", 0, None, 0.2)])) == ["must_be_off"]


@pytest.mark.parametrize(
    ("power", "on", "left", "rule", "where", "amount", "unit"),
    [
        (4.25, True, 1.0, "max_output", "/fleet/assets/0/max_output_mw", 0.25, "MW"),
        (2.25, True, 0.5, "max_output", "/outages/0", 0.25, "MW"),
        (0.75, True, 1.0, "min_output", "/fleet/assets/0/min_output_mw", 0.25, "MW"),
        (1.0, True, 0.0, "must_be_off", "/outages/0", 1.0, "intervals"),
        (0.5, False, 1.0, "off_with_output", "/fleet/assets/0", 0.5, "MW"),
        (-0.5, False, 1.0, "off_with_output", "/fleet/assets/0", 0.5, "MW"),
    ],
)
def test_a_breach_names_the_generator_its_interval_and_how_much_of_what(
    power: float, on: bool, left: float, rule: str, where: str, amount: float, unit: str
) -> None:
    found = only(one_generator([1.0, power], [True, on], outages=[outage("quay-g1", 1, 2, left)]))
    assert facts(found) == (rule, where, "quay-g1", 1, amount, unit)


def test_a_generator_of_no_output_at_all_cannot_be_on() -> None:
    found = only(one_generator([0.0], [True], asset=generator(min_output_mw=0.0, max_output_mw=0.0)))
    assert (found.rule, found.pointer) == ("must_be_off", "/fleet/assets/0/max_output_mw")


def test_fuel_is_paid_by_the_hour_the_mwh_and_its_square_while_on() -> None:
    cost = {"constant_per_hour": 18.0, "linear_per_mwh": 95.0, "quadratic_per_mw2h": 4.0}
    result = one_generator([2.0, 0.0, 1.0], asset=generator(cost=cost))
    # 18 + 190 + 16 = 224 and 18 + 95 + 4 = 117; nothing while off.
    assert result.totals.fuel_cost == result.assets[0].totals.fuel_cost == 341.0
    assert result.margin == -341.0
    quarters = one_generator([2.0], asset=generator(cost=cost), window=window([0.0], interval="PT15M"))
    assert quarters.totals.fuel_cost == 56.0


def test_a_generator_that_idles_on_pays_its_hours() -> None:
    asset = generator(min_output_mw=0.0, cost={"constant_per_hour": 18.0})
    assert one_generator([0.0, 0.0], [True, False], asset=asset).totals.fuel_cost == 18.0


def test_what_a_generator_sells_is_its_sites() -> None:
    result = one_generator([2.0, 4.0], window=window([50.0, 10.0]))
    assert (result.totals.sales, result.margin) == (140.0, 140.0)
    assert result.sites[0].power_mw == [2.0, 4.0]


def test_a_generator_without_a_decision_is_reported_and_taken_as_off() -> None:
    result = audit(job([generator()], window([50.0])), {})
    found = only(result)
    assert (found.rule, found.asset) == ("decision_missing", "quay-g1")
    assert (result.assets[0].power_mw, result.assets[0].on) == ([0.0], [False])


@pytest.mark.parametrize("on", [[True], [True, False, True], 1, "ab", [1.0, None], [math.nan, object()], {"on": True}])
def test_what_is_no_series_of_on_and_off_is_reported_and_the_power_tells(on: Any) -> None:
    result = one_generator([1.0, 0.0], on)
    assert set(broken(result)) <= {"decision_length", "decision_unreadable"}
    assert broken(result)
    assert result.assets[0].on == [True, False]


@pytest.mark.parametrize("power", [[1e9, -1e9], [math.nan, math.inf], None, [-1.0, 1e300], ["2", 2.0]])
def test_hostile_powers_of_a_generator_are_reported_and_never_raised(power: Any) -> None:
    cost = {"constant_per_hour": 1e9, "linear_per_mwh": 1e9, "quadratic_per_mw2h": 1e9}
    ramps: Document = {
        "ramp_up_mw_per_hour": 1.0,
        "ramp_down_mw_per_hour": 1.0,
        "min_up_hours": 3.0,
        "min_down_hours": 3.0,
    }
    document = job([generator(cost=cost, **ramps)], window([1.0, 1.0]))
    for on in (None, [True, True], [False, True]):
        result = audit_decisions(document, {"quay-g1": Decision(power, on)})
        assert broken(result)
        assert math.isfinite(result.margin)


@pytest.mark.parametrize(
    ("power", "on", "reserve", "rule", "hour", "unit"),
    [
        ([1.0, None], [True, False], {}, "decision_unreadable", 1, "values"),
        ([1.0, 0.0], [True, 0], {}, "decision_unreadable", 1, "values"),
        ([1.0, 0.0], [True], {}, "decision_length", None, "intervals"),
        ([1.0, 0.0], None, {"up-7": [0.0, 0.0]}, "reserve_product_unknown", None, "products"),
    ],
)
def test_what_cannot_be_read_of_a_generators_decision_names_it(
    power: Any, on: Any, reserve: Any, rule: str, hour: int | None, unit: str
) -> None:
    found = only(one_generator(power, on, reserve_mw=reserve))
    assert facts(found) == (rule, "/fleet/assets/0", "quay-g1", hour, 1.0, unit)


def test_a_generator_holds_its_own_products_only() -> None:
    market = window([0.0], reserve_products=[product()])
    found = only(one_generator([1.0], asset=generator(reserve_products=[]), window=market, reserve_mw={"up-15": [0.5]}))
    assert facts(found) == ("reserve_not_allowed", "/fleet/assets/0/reserve_products", "quay-g1", 0, 0.5, "MW")


def test_three_plants_that_share_a_load_at_least_cost() -> None:
    # Published: Wood and Wollenberg, Power Generation, Operation and Control, 2nd ed. 1996, example 3A: incremental
    # cost 9.148, outputs 393.2, 334.6 and 122.2 MW for 850 MW (the printed figures quoted from memory).
    plants = {
        "g1": (561.0, 7.92, 0.001562, 150.0, 600.0),
        "g2": (310.0, 7.85, 0.00194, 100.0, 400.0),
        "g3": (78.0, 7.97, 0.00482, 50.0, 200.0),
    }
    # Equal incremental cost b + 2cP = x with the outputs adding up to 850: x = (850 + sum b/2c) / (sum 1/2c).
    slope = sum(1 / (2 * c) for _, _, c, _, _ in plants.values())
    incremental = (850.0 + sum(b / (2 * c) for _, b, c, _, _ in plants.values())) / slope
    outputs = {name: (incremental - b) / (2 * c) for name, (_, b, c, _, _) in plants.items()}
    assert round(incremental, 3) == 9.148
    assert [round(mw, 1) for mw in outputs.values()] == [393.2, 334.6, 122.2]

    island: Document = {"id": "quay", "export_limit_mw": 0.0, "import_limit_mw": 0.0}
    assets = [
        generator(
            name,
            site="quay",
            min_output_mw=low,
            max_output_mw=high,
            cost={"constant_per_hour": a, "linear_per_mwh": b, "quadratic_per_mw2h": c},
        )
        for name, (a, b, c, low, high) in plants.items()
    ]
    document = job([*assets, load(site="quay")], window([0.0]), sites=[island], forecasts={"quay-cranes": 850.0})
    result = audit(document, {name: [mw] for name, mw in outputs.items()})
    assert broken(result) == []
    assert round(result.totals.fuel_cost, 2) == 8194.36
    assert result.margin == -result.totals.fuel_cost
    # Any shift of a MW costs more: it is the least.
    shifted = audit(document, {name: [outputs[name] + more] for name, more in (("g1", 1.0), ("g2", -1.0), ("g3", 0.0))})
    assert broken(shifted) == []
    assert shifted.totals.fuel_cost > result.totals.fuel_cost
    short = audit(document, {name: [mw - (name == "g3")] for name, mw in outputs.items()})
    assert broken(short) == ["import_limit"]
