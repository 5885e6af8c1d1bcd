"""Two methods and an oracle that shares nothing with them agree within their gaps, on requests that mix everything."""

import json
from collections import Counter
from datetime import date
from pathlib import Path
from typing import Any

import pytest

from schemas.diagnosis import Diagnosis
from schemas.schedule import Schedule
from tests.oracles.formulation import Answer, solve
from tests.oracles.random_requests import request
from tests.workers.planning.jobs import answer, indexed
from workers.planning.instance import instance_of
from workers.planning.joint import solve_jointly
from workers.planning.limits import Limits, Unwatched
from workers.planning.solvers.ending import Stopped

GAP = 1e-6
ROUND_OFF = 1e-5
"""Both sides tolerate this much of a limit, in MW or MWh, times a price."""

COUPLED = 300
UNCOUPLED = 100
STORED = Path(__file__).parents[2] / "instances"


def _asked(seed: int, *, coupled: bool) -> dict[str, Any]:
    return request(seed, coupled=coupled) | {"relative_gap": GAP}


def _keep(document: dict[str, Any], name: str, what: str) -> str:
    """Store a request that failed, so that it stays a test; say where."""
    STORED.mkdir(exist_ok=True)
    path = STORED / f"{name}.json"
    path.write_text(json.dumps(document, indent=1))
    return f"{what}; stored as tests/instances/{path.name}"


def _disagreement(found: Any, oracle: Answer) -> str | None:
    """Say in what the planner and the oracle differ; None where they agree within their gaps."""
    if isinstance(found, Diagnosis):
        return None if oracle.outcome == "infeasible" else f"infeasible ({found.summary}), oracle {oracle}"
    if not isinstance(found, Schedule) or oracle.margin is None or oracle.bound is None:
        return f"{found.outcome}, oracle {oracle.outcome}"
    if found.margin_bound is None or found.verification.violations:
        return "a schedule without a bound, or one that the audit refuses"
    slack = 2 * GAP * max(1.0, abs(oracle.margin)) + ROUND_OFF
    if abs(found.margin - oracle.margin) > slack:
        return f"margin {found.margin}, oracle {oracle.margin}"
    if found.margin_bound < oracle.margin - slack or oracle.bound < found.margin - slack:
        return f"a bound below a margin: {found.margin_bound} for {oracle.margin}, {oracle.bound} for {found.margin}"
    return None


def _agrees(seed: int, *, coupled: bool) -> str:
    """Compare planner and oracle on one request; return the outcome both came to."""
    document = _asked(seed, coupled=coupled)
    found = answer(document)
    wrong = _disagreement(found, solve(document, gap=GAP, time_limit=120))
    assert wrong is None, _keep(document, f"{'coupled' if coupled else 'uncoupled'}-{seed}", f"seed {seed}: {wrong}")
    return str(found.outcome)


def _compare(seeds: range, *, coupled: bool) -> Counter[str]:
    outcomes = Counter(_agrees(seed, coupled=coupled) for seed in seeds)
    print(f"seeds {seeds.start}-{seeds.stop - 1}, coupled {coupled}: {dict(outcomes)}")
    return outcomes


def test_planner_and_oracle_agree_on_a_tenth_of_the_coupled_fleets() -> None:
    outcomes = _compare(range(COUPLED // 10), coupled=True)
    assert outcomes["optimal"] > COUPLED // 20
    assert outcomes["infeasible"] > 0


def test_planner_and_oracle_agree_on_a_tenth_of_the_uncoupled_fleets() -> None:
    assert _compare(range(UNCOUPLED // 10), coupled=False)["optimal"] > 0


@pytest.mark.parametrize("path", sorted(STORED.glob("*.json")), ids=lambda path: path.stem)
def test_planner_and_oracle_agree_on_what_once_failed(path: Path) -> None:
    document = json.loads(path.read_text())
    wrong = _disagreement(answer(document), solve(document, gap=GAP, time_limit=120))
    assert wrong is None, wrong


def test_planner_and_oracle_agree_on_a_fleet_of_the_day() -> None:
    seed = date.today().toordinal()  # noqa: DTZ011 - any number that changes daily will do
    print(f"seed of the day: {seed}")
    _agrees(seed, coupled=True)


@pytest.mark.full
def test_planner_and_oracle_agree_on_every_coupled_fleet() -> None:
    assert _compare(range(COUPLED), coupled=True)["optimal"] > COUPLED // 2


@pytest.mark.full
def test_planner_and_oracle_agree_on_every_uncoupled_fleet() -> None:
    assert _compare(range(UNCOUPLED), coupled=False)["optimal"] > UNCOUPLED // 2


def _both_methods(seed: int) -> None:
    document = _asked(seed, coupled=False)
    apart, together = answer(document | {"method": "per_asset"}), answer(document | {"method": "milp"})
    assert apart.outcome == together.outcome, f"seed {seed}"
    if isinstance(apart, Schedule) and isinstance(together, Schedule):
        assert apart.method == "per_asset"
        assert together.method == "milp"
        assert apart.margin_bound is not None
        assert together.margin_bound is not None
        slack = 2 * GAP * max(1.0, abs(apart.margin)) + ROUND_OFF
        assert apart.margin == pytest.approx(together.margin, abs=slack)
        assert apart.margin_bound >= together.margin - ROUND_OFF
        assert together.margin_bound >= apart.margin - ROUND_OFF


def test_planning_one_by_one_and_jointly_agree() -> None:
    for seed in range(500, 512):
        _both_methods(seed)


@pytest.mark.full
def test_planning_one_by_one_and_jointly_agree_on_a_hundred_fleets() -> None:
    for seed in range(500, 600):
        _both_methods(seed)


def test_every_binary_from_the_start_gives_the_same_margin() -> None:
    # Modes are kept apart only where needed; with all of them apart the optimum must be the same.
    for seed in range(700, 706):
        instance = instance_of(indexed(_asked(seed, coupled=True)))
        limits = Limits(120.0, 1, 0.0, clock=lambda: 0.0)
        few = solve_jointly(instance, limits, Unwatched(), seed=0, seconds=60.0)
        all_of_them = solve_jointly(instance, limits, Unwatched(), seed=0, seconds=60.0, everywhere=True)
        assert few.stopped is all_of_them.stopped, f"seed {seed}"
        if few.stopped is Stopped.WITHIN_GAP:
            assert few.margin == pytest.approx(all_of_them.margin, rel=3 * GAP, abs=ROUND_OFF)


def test_stored_requests_that_failed_once_agree_now() -> None:
    for path in sorted(STORED.glob("*.json")):
        document = json.loads(path.read_text())
        wrong = _disagreement(answer(document), solve(document, gap=GAP, time_limit=120))
        assert wrong is None, f"{path.name}: {wrong}"


def test_the_same_request_gives_the_same_schedule() -> None:
    document = _asked(3, coupled=True)
    first, again = answer(document), answer(document, threads=2)
    assert isinstance(first, Schedule)
    assert isinstance(again, Schedule)
    assert first.assets == again.assets
    assert first.margin_bound == again.margin_bound
