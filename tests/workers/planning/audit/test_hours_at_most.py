"""Rows of `hours_at_most`, in hourly intervals where nothing else is said."""

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
    store,
    window,
)


def promise(**members: Any) -> Document:
    """Return no more than one hour above 1 MW of the one store."""
    plain = {"id": "quiet", "kind": "hours_at_most", "applies_to": {"assets": ["quay-b1"]}, "hours": 1.0}
    return {**plain, "threshold": {"mw": 1.0}, **members}


def test_as_many_hours_above_the_threshold_as_allowed_hold() -> None:
    result = one_store([1.5, 1.0, 0.5], commitments=[promise()])
    assert broken(result) == []
    assert result.commitments == [
        CommitmentResult(id="quiet", asset="quay-b1", day=None, required_hours=1.0, delivered_hours=1.0, met=True)
    ]


def test_more_hours_break_a_binding_commitment() -> None:
    result = one_store([1.5, 1.001, 1.0], commitments=[promise()])
    found = only(result)
    assert (found.rule, found.pointer, found.asset, found.amount, found.unit) == (
        "hours_at_most",
        "/commitments/0",
        "quay-b1",
        1.0,
        "h",
    )
    assert found.text == "quiet: quay-b1 discharges more than 1 MW for 2 h, 1 h above 1 h"
    assert (result.commitments[0].delivered_hours, result.commitments[0].met) == (2.0, False)
    assert result.totals.shortfall_cost == 0.0


def test_power_at_the_threshold_and_a_millionth_above_does_not_count() -> None:
    result = one_store([1.0000005, 1.0000002, 1.0], commitments=[promise(hours=0.0)])
    assert broken(result) == []
    assert result.verification.largest_residual == pytest.approx(5e-7)
    assert broken(one_store([1.000002], commitments=[promise(hours=0.0)])) == ["hours_at_most"]


def test_power_just_at_the_edge_of_tolerance_does_not_count_and_is_remembered() -> None:
    result = one_store([1.0 + 1e-6], commitments=[promise(hours=0.0)])
    assert broken(result) == []
    assert result.verification.largest_residual == pytest.approx(1e-6)


def test_a_threshold_of_nothing_counts_all_power_that_way() -> None:
    row = promise(threshold={"mw": 0.0}, hours=0.0)
    assert broken(one_store([0.0, -1.0, 1e-6], commitments=[row])) == []
    assert broken(one_store([0.5], commitments=[row])) == ["hours_at_most"]


def test_a_priced_excess_is_paid_and_breaks_nothing() -> None:
    result = one_store([1.5, 1.5, 1.0], commitments=[promise(hours=0.5, shortfall_price_per_hour=80.0)])
    assert broken(result) == []
    assert not result.commitments[0].met
    assert (result.totals.shortfall_cost, result.margin) == (120.0, -120.0)
    less = one_store([0.5], commitments=[promise(shortfall_price_per_hour=80.0)])
    assert less.totals.shortfall_cost == 0.0


def test_headroom_asks_for_more_distance_and_hours_are_told_at_the_threshold() -> None:
    row = promise(headroom_mw=0.25, hours=0.0)
    assert broken(one_store([0.75, 0.75], commitments=[row])) == []
    result = one_store([0.75, 0.8], commitments=[row])
    assert only(result).amount == 1.0
    assert "0.25 MW of headroom" in only(result).text
    assert (result.commitments[0].delivered_hours, result.commitments[0].met) == (0.0, False)
    # Headroom beyond the threshold asks for no power that way, and for none the other way.
    assert broken(one_store([0.0, -1.0], commitments=[promise(headroom_mw=9.0, hours=0.0)])) == []


def test_excused_intervals_do_not_count_against_it() -> None:
    excused = [{"from": "2027-03-10T01:00:00Z", "to": "2027-03-10T02:00:00Z"}]
    assert broken(one_store([1.5, 1.5, 0.0], commitments=[promise(excused=excused)])) == []
    assert broken(one_store([1.5, 0.0, 1.5], commitments=[promise(excused=excused)])) == ["hours_at_most"]


def test_hours_counted_before_are_part_of_the_first_row() -> None:
    row = promise(each_day=True, hours=2.0)
    market = window([0.0] * 4, start="2027-03-10T22:00:00Z")
    counted: Document = {"counted_before": {"commitments": {"quiet": {"quay-b1": 1.0}}}, "window": market}
    result = one_store([1.5, 0.0, 1.5, 1.5], commitments=[row], **counted)
    assert broken(result) == []
    assert [(row.day, row.delivered_hours) for row in result.commitments] == [("2027-03-10", 2.0), ("2027-03-11", 2.0)]
    assert "on 2027-03-10" in only(one_store([1.1, 1.1, 0.0, 0.0], commitments=[row], **counted)).text


def test_charging_counts_as_its_own_direction() -> None:
    row = promise(direction="charge", threshold={"fraction_of_rated": 0.5}, hours=0.0)
    asset = store(charge_limit_mw=1.0)
    assert broken(one_store([-0.5, 2.0], asset=asset, commitments=[row])) == []
    assert "quay-b1 charges more than 0.5 MW" in only(one_store([-0.6], asset=asset, commitments=[row])).text


def test_a_fraction_of_a_sum_is_of_stores_and_generators() -> None:
    # Half of 2 + 4 MW; the load has no rated power and counts in the net sum.
    row = promise(applies_to={"fleet": True}, threshold={"fraction_of_rated": 0.5}, hours=0.0)
    document = job([store(), generator(), load()], window([0.0]), commitments=[row], forecasts={"quay-cranes": 1.0})
    assert broken(audit(document, {"quay-b1": [1.0], "quay-g1": [3.0]})) == []
    assert broken(audit(document, {"quay-b1": [1.0], "quay-g1": [3.1]})) == ["hours_at_most"]
    charging = promise(applies_to={"fleet": True}, direction="charge", threshold={"fraction_of_rated": 0.5}, hours=0.0)
    document["commitments"] = [charging]
    # Half of the store's 2 MW: a generator has no rated power to charge.
    assert broken(audit(document, {"quay-b1": [-1.0], "quay-g1": [1.0]})) == []
    assert broken(audit(document, {"quay-b1": [-1.1], "quay-g1": [1.0]})) == ["hours_at_most"]
