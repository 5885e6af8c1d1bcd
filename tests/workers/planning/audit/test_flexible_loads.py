"""Flexible loads: each need drawn in full within its time, nothing outside, in hourly intervals."""

import math
from typing import Any

import pytest

from tests.workers.planning.audit.small_jobs import (
    Document,
    audit,
    audit_decisions,
    broken,
    facts,
    flexible_load,
    job,
    only,
    outage,
    window,
)
from workers.planning.audit import Decision


def need(energy: float, first: int | None = None, end: int | None = None) -> Document:
    begin = None if first is None else f"2027-03-10T{first:02}:00:00Z"
    return {"energy_mwh": energy, "from": begin, "to": None if end is None else f"2027-03-10T{end:02}:00:00Z"}


def draws(draw: list[float], needs: list[Document], **members: Any) -> Any:
    outages = members.pop("outages", [])
    market = members.pop("window", window([0.0] * len(draw)))
    document = job([flexible_load(**members)], market, energy_needs={"quay-pumps": needs}, outages=outages)
    return audit(document, {"quay-pumps": [-mw for mw in draw]})


def test_a_need_is_drawn_in_full_and_not_more() -> None:
    assert broken(draws([1.0, 0.0, 2.0], [need(3.0)])) == []
    for draw in (1.75, 1.25):
        found = only(draws([1.0, 0.0, draw], [need(2.5)]))
        assert (found.rule, found.pointer, found.asset, found.amount, found.unit) == (
            "energy_need",
            "/energy_needs/quay-pumps/0/energy_mwh",
            "quay-pumps",
            0.25,
            "MWh",
        )


def test_a_need_is_energy_and_not_power() -> None:
    assert broken(draws([1.0, 1.0], [need(0.5)], window=window([0.0, 0.0], interval="PT15M"))) == []


def test_a_need_is_held_to_a_millionth_of_it() -> None:
    assert broken(draws([1.0000009], [need(1.0)])) == []
    assert broken(draws([1.000002], [need(1.0)])) == ["energy_need"]


def test_each_need_is_drawn_within_its_own_time_and_nothing_outside() -> None:
    needs = [need(1.0, None, 2), need(2.0, 3, None)]
    assert broken(draws([0.5, 0.5, 0.0, 2.0], needs)) == []
    result = draws([0.5, 0.5, 0.25, 1.75], needs)
    assert broken(result) == ["outside_needs", "energy_need"]
    found = result.verification.violations[0]
    assert (found.pointer, found.amount) == ("/energy_needs/quay-pumps", 0.25)
    assert found.interval_start.hour == 2
    assert result.verification.violations[1].pointer == "/energy_needs/quay-pumps/1/energy_mwh"
    assert broken(draws([0.0, 1.0, 0.0, 2.0], needs)) == []
    assert broken(draws([0.0, 0.0, 1.0, 2.0], needs)) == ["outside_needs", "energy_need"]


def test_a_load_without_a_need_draws_nothing() -> None:
    assert broken(draws([0.0, 0.0], [])) == []
    assert broken(draws([0.0, 0.5], [])) == ["outside_needs"]


def test_a_load_draws_up_to_its_limit_and_feeds_nothing_in() -> None:
    assert broken(draws([2.0], [need(2.0)])) == []
    found = only(draws([2.25], [need(2.25)]))
    assert (found.rule, found.pointer, found.amount) == ("draw_limit", "/fleet/assets/0/draw_limit_mw", 0.25)
    found = only(draws([1.5, -0.5], [need(1.0)]))
    assert (found.rule, found.pointer, found.amount) == ("feeds_power", "/fleet/assets/0", 0.5)


def test_a_load_that_draws_draws_its_minimum() -> None:
    assert broken(draws([1.0, 0.0], [need(1.0)], min_draw_mw=1.0)) == []
    found = only(draws([0.75, 1.0], [need(1.75)], min_draw_mw=1.0))
    assert (found.rule, found.pointer, found.amount) == ("min_draw", "/fleet/assets/0/min_draw_mw", 0.25)


def test_a_load_that_draws_up_to_a_millionth_of_a_mw_is_idle() -> None:
    assert broken(draws([0.5, 1e-6], [need(0.500001)], min_draw_mw=0.5)) == []
    assert broken(draws([0.5, 0.0, 1e-6], [need(0.500001)], min_draw_mw=0.5, interruptible=False)) == []


@pytest.mark.parametrize(
    ("draw", "needs", "members", "rule", "where", "hour", "amount", "unit"),
    [
        ([0.0, 2.25], [need(2.25)], {}, "draw_limit", "/fleet/assets/0/draw_limit_mw", 1, 0.25, "MW"),
        ([1.5, -0.5], [need(1.0)], {}, "feeds_power", "/fleet/assets/0", 1, 0.5, "MW"),
        ([1.0, 0.75], [need(1.75)], {"min_draw_mw": 1.0}, "min_draw", "/fleet/assets/0/min_draw_mw", 1, 0.25, "MW"),
        ([1.0, 0.25], [need(1.0, None, 1)], {}, "outside_needs", "/energy_needs/quay-pumps", 1, 0.25, "MW"),
        ([1.0, 0.5], [need(2.0)], {}, "energy_need", "/energy_needs/quay-pumps/0/energy_mwh", None, 0.5, "MWh"),
        (
            [1.0, 0.0, 0.5],
            [need(1.5)],
            {"min_draw_mw": 0.5, "interruptible": False},
            "interruptible",
            "/fleet/assets/0/interruptible",
            2,
            1.0,
            "breaks",
        ),
    ],
)
def test_a_breach_names_the_load_its_interval_and_how_much_of_what(
    draw: list[float],
    needs: list[Document],
    members: Document,
    rule: str,
    where: str,
    hour: int | None,
    amount: float,
    unit: str,
) -> None:
    assert facts(only(draws(draw, needs, **members))) == (rule, where, "quay-pumps", hour, amount, unit)


def test_an_outage_scales_the_limit_and_not_the_minimum() -> None:
    outages = [outage("quay-pumps", 0, 1, 0.5)]
    assert broken(draws([1.0, 2.0], [need(3.0)], outages=outages)) == []
    found = only(draws([1.25, 2.0], [need(3.25)], outages=outages))
    assert (found.rule, found.pointer, found.amount) == ("draw_limit", "/outages/0", 0.25)
    assert broken(draws([1.0, 2.0], [need(3.0)], outages=outages, min_draw_mw=1.5)) == ["min_draw"]


def test_a_load_that_cannot_be_interrupted_draws_in_one_stretch() -> None:
    steady: Document = {"interruptible": False, "min_draw_mw": 0.5}
    assert broken(draws([0.0, 1.0, 0.5, 0.0], [need(1.5)], **steady)) == []
    found = only(draws([1.0, 0.0, 0.5, 0.0], [need(1.5)], **steady))
    assert (found.rule, found.pointer, found.amount, found.unit) == (
        "interruptible",
        "/fleet/assets/0/interruptible",
        1.0,
        "breaks",
    )
    assert found.interval_start is not None
    assert found.interval_start.hour == 2
    assert broken(draws([1.0, 0.0, 0.5, 0.0], [need(1.5)], min_draw_mw=0.5)) == []


def test_each_need_is_a_stretch_of_its_own() -> None:
    steady: Document = {"interruptible": False, "min_draw_mw": 0.5}
    needs = [need(1.0, 0, 2), need(1.0, 2, 4)]
    assert broken(draws([1.0, 0.0, 0.0, 1.0], needs, **steady)) == []
    assert broken(draws([1.0, 0.0, 1.0, 0.0], needs, **steady)) == []


def test_what_a_load_draws_is_bought() -> None:
    result = draws([1.0, 2.0], [need(3.0)], window=window([10.0, 20.0]))
    assert (result.totals.purchases, result.margin) == (50.0, -50.0)


def test_a_load_without_a_decision_is_reported_and_leaves_its_need() -> None:
    document = job([flexible_load()], window([0.0]), energy_needs={"quay-pumps": [need(1.0)]})
    result = audit(document, {})
    assert broken(result) == ["decision_missing", "energy_need"]
    found = result.verification.violations[0]
    assert facts(found) == ("decision_missing", "/fleet/assets/0", "quay-pumps", None, 1.0, "intervals")


@pytest.mark.parametrize("power", [[1e9, -1e9], [math.inf, 1.0], None, [1.0], "12"])
def test_hostile_powers_of_a_load_are_reported(power: Any) -> None:
    document = job([flexible_load(interruptible=False)], window([1.0, 1.0]), energy_needs={"quay-pumps": [need(1.0)]})
    result = audit_decisions(document, {"quay-pumps": Decision(power, reserve_mw={"up": [1.0]})})
    assert broken(result)
    assert math.isfinite(result.margin)
