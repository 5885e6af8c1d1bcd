"""Rows of `firm_delivery`: so much power in every interval, in hourly intervals where nothing else is said."""

from typing import Any

import pytest

from schemas.schedule import CommitmentResult
from tests.workers.planning.audit.small_jobs import (
    Document,
    audit,
    broken,
    generator,
    job,
    load,
    one_store,
    only,
    renewable,
    window,
)


def promise(power: Any, **members: Any) -> Document:
    return {"id": "firm", "kind": "firm_delivery", "applies_to": {"assets": ["quay-b1"]}, "power_mw": power, **members}


def test_power_as_due_in_each_interval_holds() -> None:
    result = one_store([1.0, -1.0, 1.5], commitments=[promise([1.0, 0.0, 0.5])])
    assert broken(result) == []
    # What is more than due does not count, and where nothing is due nothing is asked.
    assert result.commitments == [
        CommitmentResult(id="firm", asset="quay-b1", required_mwh=1.5, delivered_mwh=1.5, met=True)
    ]


def test_less_power_than_due_breaks_it_in_that_interval() -> None:
    result = one_store([2.0, 0.75, -1.0], commitments=[promise(1.0)])
    assert broken(result) == ["firm_delivery", "firm_delivery"]
    found = result.verification.violations[0]
    assert (found.pointer, found.asset, found.amount, found.unit) == ("/commitments/0", "quay-b1", 0.25, "MW")
    assert found.interval_start is not None
    assert found.interval_start.hour == 1
    assert found.text == ("firm: quay-b1 discharges 0.75 MW from 2027-03-10 01:00+00:00, 0.25 MW short of the 1 MW due")
    assert result.verification.violations[1].amount == 1.0
    row = result.commitments[0]
    assert (row.required_mwh, row.delivered_mwh, row.met) == (3.0, 1.75, False)
    assert result.totals.shortfall_cost == 0.0


def test_a_millionth_of_a_mw_less_is_let_pass() -> None:
    result = one_store([0.9999995], commitments=[promise(1.0)])
    assert broken(result) == []
    assert result.verification.largest_residual == pytest.approx(5e-7)
    assert broken(one_store([0.999998], commitments=[promise(1.0)])) == ["firm_delivery"]


def test_just_a_millionth_of_a_mw_less_is_met_and_beside_more_is_no_breach() -> None:
    result = one_store([0.0, 1.0], commitments=[promise([1e-6, 1.0])])
    assert (broken(result), result.commitments[0].met) == ([], True)
    assert result.verification.largest_residual == 1e-6
    assert only(one_store([0.0, 0.0], commitments=[promise([1e-6, 1.0])])).amount == 1.0


def test_nothing_is_due_in_excused_intervals_nor_outside_its_borders() -> None:
    excused = [{"from": "2027-03-10T01:00:00Z", "to": "2027-03-10T02:00:00Z"}]
    result = one_store([1.0, 0.0, 1.0], commitments=[promise(1.0, excused=excused)])
    assert broken(result) == []
    assert (result.commitments[0].required_mwh, result.commitments[0].delivered_mwh) == (2.0, 2.0)
    late = promise(1.0, **{"from": "2027-03-10T02:00:00Z"})
    assert broken(one_store([0.0, 0.0, 1.0], commitments=[late])) == []


def test_a_priced_shortfall_is_paid_by_the_mwh() -> None:
    row = promise([1.0, 1.0], shortfall_price_per_mwh=60.0)
    result = one_store([0.75, -1.0], commitments=[row], window=window([0.0, 0.0], interval="PT30M"))
    assert broken(result) == []
    assert not result.commitments[0].met
    # A quarter and a whole MW for half an hour each.
    assert (result.totals.shortfall_cost, result.margin) == (37.5, -37.5)


def test_what_was_counted_before_makes_up_for_nothing() -> None:
    counted = {"commitments": {"firm": 5.0}}
    result = one_store([0.5], commitments=[promise(1.0)], counted_before=counted)
    assert broken(result) == ["firm_delivery"]
    assert (result.commitments[0].required_mwh, result.commitments[0].delivered_mwh) == (1.0, 5.5)


def test_each_day_is_a_row_of_its_own() -> None:
    market = window([0.0] * 3, start="2027-03-10T23:00:00Z")
    row = promise(1.0, each_day=True, between=["23:00", "01:00"], shortfall_price_per_mwh=1.0)
    result = one_store([1.0, 0.5, 0.0], window=market, commitments=[row])
    assert [(row.day, row.required_mwh, row.met) for row in result.commitments] == [("2027-03-10", 2.0, False)]
    assert result.totals.shortfall_cost == 0.5


def test_charging_may_be_firm() -> None:
    assert broken(one_store([-1.0], commitments=[promise(1.0, direction="charge")])) == []
    found = only(one_store([-0.5], commitments=[promise(1.0, direction="charge")]))
    assert found.amount == 0.5
    assert "quay-b1 charges 0.5 MW" in found.text


@pytest.mark.parametrize("over", [{"fleet": True}, {"site": "quay"}, {"group": ["g1", "pv", "cranes"]}])
def test_a_sum_delivers_what_its_meter_reads(over: Document) -> None:
    assets = [generator("g1", site="quay"), renewable("pv", site="quay"), load("cranes", site="quay")]
    document = job(
        assets,
        window([0.0]),
        sites=[{"id": "quay"}],
        forecasts={"pv": 2.0, "cranes": 1.5},
        commitments=[promise(2.0, applies_to=over)],
    )
    assert broken(audit(document, {"g1": [2.0], "pv": [1.5]})) == []
    found = only(audit(document, {"g1": [2.0], "pv": [1.25]}))
    assert (found.asset, found.amount) == (None, 0.25)


def test_a_series_of_another_length_is_refused() -> None:
    with pytest.raises(ValueError, match="for 1 intervals"):
        one_store([1.0], commitments=[promise([1.0, 1.0])])
