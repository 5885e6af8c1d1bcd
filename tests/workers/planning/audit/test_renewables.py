"""Renewables: up to their forecast, in hourly intervals."""

import math
from typing import Any

import pytest

from tests.workers.planning.audit.small_jobs import (
    Document,
    audit,
    audit_decisions,
    broken,
    facts,
    job,
    only,
    outage,
    renewable,
    window,
)
from workers.planning.audit import Decision


def gives(power: list[float], forecast: Any = 2.0, prices: list[float] | None = None, **members: Any) -> Any:
    outages = members.pop("outages", [])
    market = window(prices or [0.0] * len(power))
    document = job([renewable(**members)], market, forecasts={"quay-pv": forecast}, outages=outages)
    return audit(document, {"quay-pv": power})


def test_a_renewable_gives_up_to_its_forecast() -> None:
    assert broken(gives([0.0, 1.0, 2.0])) == []
    found = only(gives([0.5, 1.5], [1.0, 1.25]))
    assert (found.rule, found.pointer, found.asset, found.amount, found.unit) == (
        "forecast",
        "/forecasts/quay-pv",
        "quay-pv",
        0.25,
        "MW",
    )
    assert found.interval_start is not None
    assert found.interval_start.hour == 1


def test_a_renewable_draws_nothing() -> None:
    found = only(gives([0.0, -0.5]))
    assert facts(found) == ("draws_power", "/fleet/assets/0", "quay-pv", 1, 0.5, "MW")


def test_one_that_cannot_be_curtailed_gives_its_forecast() -> None:
    assert broken(gives([2.0], curtailable=False)) == []
    found = only(gives([2.0, 1.75], curtailable=False))
    assert facts(found) == ("not_curtailable", "/fleet/assets/0/curtailable", "quay-pv", 1, 0.25, "MW")
    assert broken(gives([2.25], curtailable=False)) == ["forecast"]


def test_an_outage_scales_the_forecast() -> None:
    outages = [outage("quay-pv", 1, 2, 0.5)]
    assert broken(gives([2.0, 1.0], outages=outages)) == []
    assert only(gives([2.0, 1.25], outages=outages)).amount == 0.25
    assert broken(gives([2.0, 1.0], outages=outages, curtailable=False)) == []
    assert broken(gives([2.0, 2.0], outages=outages, curtailable=False)) == ["forecast"]


def test_what_it_gives_is_sold_and_costs_by_the_mwh() -> None:
    result = gives([2.0, 0.5], prices=[10.0, 20.0], cost_per_mwh=4.0)
    assert (result.totals.sales, result.totals.fuel_cost, result.margin) == (30.0, 10.0, 20.0)
    assert result.assets[0].totals.fuel_cost == 10.0
    # 2 MW through a quarter of an hour are 0.5 MWh, at 4.
    market = window([0.0], interval="PT15M")
    document = job([renewable(cost_per_mwh=4.0)], market, forecasts={"quay-pv": 2.0})
    assert audit(document, {"quay-pv": [2.0]}).totals.fuel_cost == 2.0


@pytest.mark.parametrize(("curtailable", "taken"), [(True, [0.0, 0.0]), (False, [2.0, 1.0])])
def test_a_renewable_without_a_decision_is_reported(curtailable: bool, taken: list[float]) -> None:
    document = job([renewable(curtailable=curtailable)], window([0.0, 0.0]), forecasts={"quay-pv": [2.0, 1.0]})
    result = audit(document, {})
    assert facts(only(result)) == ("decision_missing", "/fleet/assets/0", "quay-pv", None, 2.0, "intervals")
    assert result.assets[0].power_mw == taken


@pytest.mark.parametrize("power", [[1e9, -1e9], [math.nan, 1.0], None, [1.0], object()])
def test_hostile_powers_of_a_renewable_are_reported(power: Any) -> None:
    document = job([renewable()], window([1.0, 1.0]), forecasts={"quay-pv": 2.0})
    result = audit_decisions(document, {"quay-pv": Decision(power, on=[True], reserve_mw={"up": [1.0]})})
    assert broken(result)
    assert math.isfinite(result.margin)


def test_a_renewable_without_a_forecast_or_with_one_of_another_length_is_refused() -> None:
    document: Document = job([renewable()], window([0.0]))
    with pytest.raises(ValueError, match="quay-pv"):
        audit(document, {"quay-pv": [0.0]})
    with pytest.raises(ValueError, match="for 1 intervals"):
        audit({**document, "forecasts": {"quay-pv": [1.0, 1.0]}}, {"quay-pv": [0.0]})
