"""Pointers, tolerances and the list of violations."""

from datetime import UTC, datetime

import pytest

from schemas.schedule import Violation
from tests.workers.planning.audit.small_jobs import (
    Document,
    audit,
    flexible_load,
    generator,
    job,
    one_generator,
    one_store,
    product,
    store,
    window,
)
from workers.planning.audit.ledger import MOST_VIOLATIONS, Ledger, pointer

STARTS = [datetime(2027, 3, 10, hour, tzinfo=UTC) for hour in range(3)]


def test_ids_in_pointers_are_escaped() -> None:
    # RFC 6901, section 3: "~" becomes "~0" and "/" becomes "~1".
    assert pointer("limits", "a/b~c", "export_limit_mw") == "/limits/a~1b~0c/export_limit_mw"
    assert pointer("fleet", "assets", 3, "charge_limit_mw") == "/fleet/assets/3/charge_limit_mw"


def test_each_interval_of_a_limit_is_a_check() -> None:
    ledger = Ledger(STARTS)
    told: list[int] = []
    ledger.at_most([1.0, 2.0, 3.0], 2.0, lambda t, _: told.append(t))
    assert (ledger.checks, told) == (3, [2])
    ledger.at_most([1.0, 2.0, 3.0], [1.0, float("inf"), 3.0], lambda t, _: told.append(t))
    assert (ledger.checks, told) == (5, [2])
    # An infinite limit is no check beside a broken one either.
    ledger.at_most([1.0, 2.0, 4.0], [1.0, float("inf"), 3.0], lambda t, _: told.append(t))
    assert (ledger.checks, told) == (7, [2, 2])


def test_a_tolerance_grows_with_the_limit_from_one_up() -> None:
    ledger = Ledger(STARTS)
    assert ledger.is_held(0.9e-6, 0.001)
    assert not ledger.is_held(1.1e-6, 0.001)
    assert ledger.is_held(0.9e-3, 1000.0)
    assert not ledger.is_held(1.1e-3, -1000.0)
    assert ledger.largest_residual == 0.9e-3


def test_more_violations_than_a_person_reads_are_counted_not_listed() -> None:
    ledger = Ledger(STARTS)
    for _ in range(MOST_VIOLATIONS):
        ledger.report("discharge_limit", "/fleet", 1.0, "MW", "above", interval=2)
    assert len(ledger.verification().violations) == MOST_VIOLATIONS
    ledger.at_most([5.0, 5.0, 1.0], 2.0, lambda t, excess: ledger.report("x", "/fleet", excess, "MW", f"{t}"))
    ledger.report("discharge_limit", "/fleet", 1.0, "MW", "above")
    violations = ledger.verification().violations
    assert len(violations) == MOST_VIOLATIONS + 1
    assert violations[-1] == Violation(
        rule="further_violations",
        pointer="",
        amount=3.0,
        unit="violations",
        text="3 further violations are not listed one by one",
    )


def test_every_rule_a_store_has_adds_its_checks() -> None:
    bare = one_store([0.0, 0.0]).verification.checks
    # The decision, two limits of power, floor and ceiling in two intervals each, the final target.
    assert bare == 1 + 2 * 2 + 2 * 2 + 1
    assert one_store([0.0, 0.0], asset=store(ramp_mw_per_hour=1.0)).verification.checks == bare + 2
    assert one_store([0.0, 0.0], asset=store(max_cycles_per_day=1.0)).verification.checks == bare + 1


@pytest.mark.parametrize(
    ("members", "more"),
    [
        # Two runs of discharging, one of charging: three minimum powers and, in each kind of rule, three runs.
        ({"min_discharge_mw": 1.0}, 2),
        ({"min_discharge_mw": 1.0, "min_charge_mw": 1.0}, 3),
        ({"min_discharge_mw": 1.0, "min_charge_mw": 1.0, "min_run_hours": 2.0}, 3 + 3),
        ({"min_discharge_mw": 1.0, "min_charge_mw": 1.0, "min_rest_hours": 1.0}, 3 + 3),
        ({"min_discharge_mw": 1.0, "min_charge_mw": 1.0, "max_starts_per_day": 1}, 3 + 1),
    ],
)
def test_each_minimum_power_run_rest_and_day_of_a_store_is_a_check(members: Document, more: int) -> None:
    power = [1.0, 0.0, -1.0, 0.0, 1.0]
    bare = one_store(power).verification.checks
    assert one_store(power, asset=store(**members)).verification.checks == bare + more


def test_each_run_start_and_state_of_a_generator_is_a_check() -> None:
    power = [1.0, 0.0, 1.0, 0.0]
    # The decision, whether it must be off, its least and its most in each interval.
    bare = 1 + 3 * 4
    assert one_generator(power).verification.checks == bare
    assert one_generator(power, [True, False, True, False]).verification.checks == bare + 1
    # Two runs, both of them begun in the window.
    assert one_generator(power, asset=generator(min_up_hours=1.0)).verification.checks == bare + 2
    assert one_generator(power, asset=generator(min_down_hours=1.0)).verification.checks == bare + 2


def test_each_need_of_a_load_and_each_draw_is_a_check() -> None:
    need = {"energy_mwh": 1.0, "from": None, "to": "2027-03-10T01:00:00Z"}
    cases: list[tuple[Document, float, int]] = [
        # The decision, most and least in two intervals, the need.
        ({}, 0.0, 0),
        # A draw outside the need.
        ({}, 0.5, 1),
        ({"min_draw_mw": 1.0}, 0.0, 1),
        ({"min_draw_mw": 1.0, "interruptible": False}, 0.0, 2),
    ]
    for members, draw, more in cases:
        document = job([flexible_load(**members)], window([0.0, 0.0]), energy_needs={"quay-pumps": [need]})
        assert audit(document, {"quay-pumps": [-1.0, -draw]}).verification.checks == 1 + 2 * 2 + 1 + more


@pytest.mark.parametrize(
    ("kind", "members", "more"),
    [
        ("hours_at_least", {"threshold": {"mw": 1.0}, "hours": 1.0}, 1),
        ("hours_at_most", {"threshold": {"mw": 1.0}, "hours": 1.0}, 1),
        ("energy_at_least", {"energy_mwh": 1.0}, 1),
        ("energy_at_most", {"energy_mwh": 1.0}, 1),
        # Where nothing is due nothing is checked.
        ("firm_delivery", {"power_mw": [1.0, 0.0, 0.5]}, 2),
    ],
)
def test_each_row_and_each_interval_in_which_something_is_due_is_a_check(
    kind: str, members: Document, more: int
) -> None:
    power = [1.0, 0.0, 0.5]
    row = {"id": "row", "kind": kind, "applies_to": {"assets": ["quay-b1"]}, **members}
    assert one_store(power, commitments=[row]).verification.checks == one_store(power).verification.checks + more


def test_each_product_and_each_block_of_reserve_is_a_check_and_so_is_each_lot() -> None:
    bare = one_generator([1.0] * 4).verification.checks
    # A block of one interval asks nothing.
    for block_hours, more in ((None, 0), (1.0, 0), (2.0, 2)):
        market = window([0.0] * 4, reserve_products=[product(block_hours=block_hours)])
        held = one_generator([1.0] * 4, window=market, reserve_mw={"up-15": [0.5] * 4}).verification.checks
        # The product and its room in each interval; while on, that it is off asks nothing.
        assert held == bare + 1 + 4 + more
    # Where none is held its room asks nothing.
    market = window([0.0] * 4, reserve_products=[product()])
    held = one_generator([1.0] * 4, window=market, reserve_mw={"up-15": [0.0, 0.5, 0.5, 0.5]}).verification.checks
    assert held == bare + 1 + 3
    idle = one_store([0.0, 0.0]).verification.checks
    assert one_store([0.0, 0.0], fleet={"lot_mw": 1.0}).verification.checks == idle + 2
