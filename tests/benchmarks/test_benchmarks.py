"""The yardstick is the one it was, and what is measured is the same question to every tool."""

from dataclasses import replace
from hashlib import sha256

import pytest

from tests.benchmarks import fleets
from tests.benchmarks.run import BASELINE, DIRECT, HERE, OURS, Case, Measured, contradictions, measure, relative_gap

FROZEN_SHA256 = "af1a34d208ab9845892b26c574a833dbfedafb2dbbffa22103132bb457d97f4c"
THREE = (BASELINE, DIRECT, OURS)
ONE = Measured(
    tool="one",
    seconds=1.0,
    build_seconds=0.1,
    solver_seconds=0.9,
    margin=100.0,
    bound=100.05,
    relative_gap=0.0005,
    ran_out_of_time=False,
)


def test_the_baseline_is_the_frozen_one() -> None:
    assert sha256((HERE / "plain_pyomo.py").read_bytes()).hexdigest() == FROZEN_SHA256


@pytest.mark.parametrize(
    "case",
    [
        Case("uncoupled", fleets.uncoupled, 2, rounds=1, each=True, first=1, intervals=24),
        Case("coupled", fleets.coupled_with_sites, 2, rounds=1, intervals=24),
    ],
    ids=lambda case: case.name,
)
def test_baseline_bare_solver_and_plan_agree_within_their_gaps(case: Case) -> None:
    measured = measure(case, seed=5, tools=THREE)
    assert [one.tool for one in measured] == list(THREE)
    assert contradictions(measured) == []
    assert not any(one.ran_out_of_time for one in measured)
    assert all(one.relative_gap <= fleets.RELATIVE_GAP * (1 + 1e-6) for one in measured)
    # An idle fleet earns nothing: agreement on that would say little.
    assert all(one.margin is not None and abs(one.margin) > 1.0 for one in measured)


def test_a_margin_above_the_bound_of_another_tool_is_a_contradiction() -> None:
    other = replace(ONE, tool="other", margin=99.9, bound=99.95)
    assert contradictions([ONE, other]) == ["one earns 100.000000, above the 99.950000 that other proves"]


def test_margins_within_every_bound_are_no_contradiction() -> None:
    assert contradictions([ONE, replace(ONE, tool="other", margin=99.99, bound=100.02)]) == []


def test_a_bound_that_is_no_number_is_a_contradiction() -> None:
    assert contradictions([replace(ONE, bound=float("nan"))])


def test_a_tool_without_a_plan_contradicts_by_its_bound_only() -> None:
    nothing = replace(ONE, tool="other", margin=None, bound=99.0, ran_out_of_time=True)
    assert contradictions([ONE, nothing]) == ["one earns 100.000000, above the 99.000000 that other proves"]


def test_a_gap_is_infinite_without_a_plan_and_never_below_zero() -> None:
    assert relative_gap(None, 99.0) == float("inf")
    assert relative_gap(100.0, 100.5) == pytest.approx(0.005)
    assert relative_gap(100.0, 99.9999999) == 0.0


def test_the_same_seed_draws_the_same_request() -> None:
    assert fleets.coupled_with_sites(7, seed=3) == fleets.coupled_with_sites(7, seed=3)
    assert fleets.uncoupled(7, seed=3) != fleets.uncoupled(7, seed=4)
