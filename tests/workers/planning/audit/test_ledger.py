"""Pointers, tolerances and the list of violations."""

from datetime import UTC, datetime

from schemas.schedule import Violation
from tests.workers.planning.audit.small_jobs import one_store, store
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
