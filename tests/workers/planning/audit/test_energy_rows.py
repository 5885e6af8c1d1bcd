"""Rows of `energy_at_least` and `energy_at_most`, in hourly intervals where nothing else is said."""

from typing import Any

import pytest

from schemas.schedule import CommitmentResult
from tests.workers.planning.audit.small_jobs import (
    Document,
    audit,
    broken,
    flexible_load,
    job,
    one_store,
    only,
    renewable,
    store,
    window,
)

LEAST, MOST = "energy_at_least", "energy_at_most"


def promise(kind: str, energy: float, **members: Any) -> Document:
    return {"id": "energy", "kind": kind, "applies_to": {"assets": ["quay-b1"]}, "energy_mwh": energy, **members}


def test_as_much_energy_as_asked_holds_and_less_breaks() -> None:
    result = one_store([1.0, -1.0, 0.5], commitments=[promise(LEAST, 1.5)])
    assert broken(result) == []
    assert result.commitments == [
        CommitmentResult(id="energy", asset="quay-b1", required_mwh=1.5, delivered_mwh=1.5, met=True)
    ]
    result = one_store([1.0, -1.0, 0.25], commitments=[promise(LEAST, 1.5)])
    found = only(result)
    assert (found.rule, found.pointer, found.asset, found.amount, found.unit) == (
        LEAST,
        "/commitments/0",
        "quay-b1",
        0.25,
        "MWh",
    )
    assert found.text == "energy: quay-b1 discharges 1.25 MWh, 0.25 MWh short of 1.5 MWh"
    assert (result.commitments[0].delivered_mwh, result.commitments[0].met) == (1.25, False)
    assert result.totals.shortfall_cost == 0.0


def test_as_much_energy_as_allowed_holds_and_more_breaks() -> None:
    assert broken(one_store([1.0, -1.0, 0.5], commitments=[promise(MOST, 1.5)])) == []
    result = one_store([1.0, -1.0, 0.75], commitments=[promise(MOST, 1.5)])
    found = only(result)
    assert (found.rule, found.amount) == (MOST, 0.25)
    assert found.text == "energy: quay-b1 discharges 1.75 MWh, 0.25 MWh above 1.5 MWh"
    assert not result.commitments[0].met


def test_energy_is_held_to_a_millionth_of_it() -> None:
    for kind, sign in ((LEAST, -1), (MOST, 1)):
        assert broken(one_store([1.0 + sign * 9e-7], commitments=[promise(kind, 1.0)])) == []
        assert broken(one_store([1.0 + sign * 2e-6], commitments=[promise(kind, 1.0)])) == [kind]


def test_energy_is_power_by_the_hour() -> None:
    quarters = window([0.0, 0.0], interval="PT15M")
    assert broken(one_store([2.0, 2.0], window=quarters, commitments=[promise(LEAST, 1.0)])) == []
    assert broken(one_store([2.0, 1.9], window=quarters, commitments=[promise(LEAST, 1.0)])) == [LEAST]


def test_charged_energy_counts_as_its_own_direction() -> None:
    row = promise(LEAST, 1.0, direction="charge")
    assert broken(one_store([-1.0, 2.0], commitments=[row])) == []
    result = one_store([-0.5, 2.0], commitments=[row])
    assert only(result).text == "energy: quay-b1 charges 0.5 MWh, 0.5 MWh short of 1 MWh"


@pytest.mark.parametrize(("kind", "cost"), [(LEAST, 35.0), (MOST, 0.0)])
def test_a_priced_shortfall_is_paid_by_the_mwh(kind: str, cost: float) -> None:
    result = one_store([1.0, 0.5], commitments=[promise(kind, 2.0, shortfall_price_per_mwh=70.0)])
    assert broken(result) == []
    assert (result.totals.shortfall_cost, result.margin) == (cost, -cost)


def test_a_priced_excess_is_paid_by_the_mwh() -> None:
    result = one_store([1.0, 1.5], commitments=[promise(MOST, 2.0, shortfall_price_per_mwh=70.0)])
    assert broken(result) == []
    assert (result.commitments[0].met, result.totals.shortfall_cost) == (False, 35.0)


def test_energy_counted_before_is_part_of_the_first_row_and_rows_are_days() -> None:
    row = promise(LEAST, 2.0, each_day=True)
    market = window([0.0] * 4, start="2027-03-10T22:00:00Z")
    counted = {"commitments": {"energy": 1.0}}
    result = one_store([0.5, 0.5, 1.0, 0.5], window=market, commitments=[row], counted_before=counted)
    assert [(row.day, row.delivered_mwh, row.met) for row in result.commitments] == [
        ("2027-03-10", 2.0, True),
        ("2027-03-11", 1.5, False),
    ]
    assert "on 2027-03-11" in only(result).text


def test_the_net_sum_of_a_group_counts_interval_by_interval() -> None:
    # Net 1.75 - 0.25, then -1: the second interval takes nothing back.
    assets = [store(standby_load_mw=0.25), renewable(), flexible_load()]
    members = ["quay-b1", "quay-pv", "quay-pumps"]
    document = job(
        assets,
        window([0.0, 0.0]),
        forecasts={"quay-pv": 1.0},
        energy_needs={"quay-pumps": [{"energy_mwh": 1.0}]},
        commitments=[promise(LEAST, 1.5, applies_to={"group": members})],
    )
    powers = {"quay-b1": [1.0, 0.0], "quay-pv": [0.75, 0.0], "quay-pumps": [0.0, -1.0]}
    assert broken(audit(document, powers)) == []
    assert only(audit(document, {**powers, "quay-pv": [0.5, 1.0]})).amount == 0.25
