"""Rows of `reserve_holding`: so much reserve in every interval, in hourly intervals where nothing else is said."""

from typing import Any

import pytest

from schemas.schedule import CommitmentResult
from tests.workers.planning.audit.small_jobs import (
    Document,
    audit_decisions,
    broken,
    generator,
    job,
    load,
    only,
    product,
    store,
    window,
)
from workers.planning.audit import Decision, Replay


def promise(power: Any, **members: Any) -> Document:
    return {
        "id": "spin",
        "kind": "reserve_holding",
        "applies_to": {"assets": ["quay-b1"]},
        "product": "up-15",
        "power_mw": power,
        **members,
    }


def quay(held_b1: Any, held_g1: Any, *rows: Document, interval: str = "PT60M", **members: Any) -> Replay:
    """Audit a store and a generator on one site with a load, at rest and at 1 MW."""
    count = len(held_b1)
    other = product("up-99", sustain_minutes=0.0)
    market = window([0.0] * count, interval=interval, reserve_products=[product(price_per_mw_per_hour=2.0), other])
    assets = [store(site="quay"), generator(site="quay"), load(site="quay")]
    document = job(
        assets,
        market,
        sites=[{"id": "quay"}],
        forecasts={"quay-cranes": 1.0},
        commitments=list(rows),
        **members,
    )
    decisions = {
        "quay-b1": Decision([0.0] * count, reserve_mw={"up-15": held_b1, "up-99": [0.5] * count}),
        "quay-g1": Decision([1.0] * count, reserve_mw={"up-15": held_g1}),
    }
    return audit_decisions(document, decisions)


def test_as_much_reserve_as_due_in_each_interval_holds() -> None:
    result = quay([1.0, 1.0], [0.0, 0.0], promise([1.0, 0.5]))
    assert broken(result) == []
    assert result.commitments == [
        CommitmentResult(id="spin", asset="quay-b1", required_mw_hours=1.5, delivered_mw_hours=1.5, met=True)
    ]


def test_less_reserve_than_due_breaks_it_in_that_interval() -> None:
    result = quay([1.0, 0.75], [2.0, 2.0], promise(1.0))
    found = only(result)
    assert (found.rule, found.pointer, found.asset, found.amount, found.unit) == (
        "reserve_holding",
        "/commitments/0",
        "quay-b1",
        0.25,
        "MW",
    )
    assert found.interval_start is not None
    assert found.interval_start.hour == 1
    assert "0.75 MW of up-15" in found.text
    assert (result.commitments[0].delivered_mw_hours, result.commitments[0].met) == (1.75, False)
    assert result.totals.shortfall_cost == 0.0


def test_each_asset_holds_its_own() -> None:
    row = promise(1.0, applies_to={"assets": ["quay-b1", "quay-g1"]})
    assert broken(quay([1.0], [1.0], row)) == []
    assert only(quay([1.5], [0.5], row)).asset == "quay-g1"


@pytest.mark.parametrize("over", [{"group": ["quay-b1", "quay-g1"]}, {"site": "quay"}, {"fleet": True}])
def test_a_sum_holds_what_its_assets_hold_together(over: Document) -> None:
    row = promise(2.0, applies_to=over)
    assert broken(quay([1.5], [0.5], row)) == []
    found = only(quay([1.5], [0.25], row))
    assert (found.asset, found.amount) == (None, 0.25)


def test_the_same_mw_counts_in_each_commitment_and_earns_once() -> None:
    result = quay([1.0], [0.0], promise(1.0), promise(1.0, id="again", applies_to={"fleet": True}))
    assert broken(result) == []
    assert [row.met for row in result.commitments] == [True, True]
    assert result.totals.reserve_income == 2.0


def test_a_priced_shortfall_is_paid_by_the_mw_and_hour() -> None:
    row = promise(1.0, shortfall_price_per_mw_per_hour=50.0)
    result = quay([0.75, 0.0], [0.0, 0.0], row, interval="PT30M")
    assert broken(result) == []
    assert result.totals.shortfall_cost == 31.25
    # 0.25 and 1 MW are missing for half an hour each; 0.75 MW held for half an hour at 2 are earned.
    assert result.margin == 0.75 - 31.25


def test_rows_are_days_and_what_was_counted_before_makes_up_for_nothing() -> None:
    row = promise(1.0, each_day=True, shortfall_price_per_mw_per_hour=1.0)
    result = quay([0.5] * 25, [0.0] * 25, row, counted_before={"commitments": {"spin": 4.0}})
    assert [(row.day, row.required_mw_hours, row.delivered_mw_hours) for row in result.commitments] == [
        ("2027-03-10", 24.0, 16.0),
        ("2027-03-11", 1.0, 0.5),
    ]
    assert result.totals.shortfall_cost == 12.5


def test_what_was_counted_before_may_be_told_by_asset() -> None:
    row = promise(1.0, applies_to={"assets": ["quay-b1", "quay-g1"]})
    result = quay([1.0], [1.0], row, counted_before={"commitments": {"spin": {"quay-g1": 3.0}}})
    assert [(row.asset, row.delivered_mw_hours) for row in result.commitments] == [("quay-b1", 1.0), ("quay-g1", 4.0)]


def test_reserve_that_may_not_be_held_counts_for_nothing() -> None:
    market = window([0.0], reserve_products=[product()])
    document = job([store(reserve_products=[])], market, commitments=[promise(1.0, applies_to={"fleet": True})])
    result = audit_decisions(document, {"quay-b1": Decision([0.0], reserve_mw={"up-15": [1.0]})})
    assert broken(result) == ["reserve_not_allowed", "reserve_holding"]


def test_a_row_for_an_unknown_product_is_refused() -> None:
    with pytest.raises(ValueError, match="up-7"):
        quay([0.0], [0.0], promise(1.0, product="up-7"))
