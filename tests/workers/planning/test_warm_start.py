"""An earlier schedule saves work, never quality: same margins within the gap, nothing worse, and no harm where it does
not fit.
"""

import random
from collections import Counter
from collections.abc import Iterator
from contextlib import contextmanager
from time import monotonic
from typing import Any
from unittest.mock import patch

import numpy as np
import pytest

from schemas.diagnosis import Diagnosis
from schemas.reading import read_job
from schemas.schedule import Schedule
from tests.oracles.random_mixed import mixed_request
from tests.workers.planning.jobs import NOW, answer, hours, indexed, job, planned, power_of, store
from tests.workers.planning.test_unit_commitment import REFERENCE, system
from workers.planning.assembly import UnitPlan
from workers.planning.earlier import earlier_of, plans_for
from workers.planning.instance import Instance, instance_of
from workers.planning.joint import Solution, solve_by_cp_sat, solve_jointly
from workers.planning.limits import Limits, StoppableWatch, Unwatched
from workers.planning.plan import plan
from workers.planning.solvers import cp_sat, highs
from workers.planning.solvers.ending import Stopped

Document = dict[str, Any]

GAP = 1e-6
CP_SAT_GAP = 1e-3
ROUND_OFF = 1e-5
MIXED = 120
DAY = [31.0, 24.0, 18.0, 22.0, 47.0, 63.0, 52.0, 44.0, 71.0, 90.0, 66.0, 38.0]


def again(document: Document, earlier: Schedule) -> Any:
    """Plan a document from an earlier schedule."""
    read = read_job(document)
    return plan(read, Limits.of(read, NOW), earlier=earlier)


@contextmanager
def counted() -> Iterator[Counter[str]]:
    """Count the solves of HiGHS, by whether whole numbers are asked for, and those of CP-SAT."""
    seen: Counter[str] = Counter()
    real, real_cp_sat = highs.solve, cp_sat.solve

    def counting(matrix: highs.Matrix, *arguments: Any) -> Any:
        seen["mip" if matrix.integer.any() else "lp"] += 1
        return real(matrix, *arguments)

    def counting_cp_sat(*arguments: Any, **named: Any) -> Any:
        seen["cp_sat"] += 1
        return real_cp_sat(*arguments, **named)

    with patch.object(highs, "solve", counting), patch.object(cp_sat, "solve", counting_cp_sat):
        yield seen


def fleet(**members: Any) -> Document:
    """Return three lossy stores behind one connection, each with hours to hold."""
    assets = [store(f"quay-b{k}", charge_efficiency=0.95, discharge_efficiency=0.93 + k / 100) for k in range(3)]
    promised = [hours({"assets": [asset["id"]]}, 2 + k, 0.5, id=f"firm-{k}") for k, asset in enumerate(assets)]
    limit = {"export_limit_mw": 1.7, "import_limit_mw": 1.7}
    return job(DAY, *assets, stored=1.0, fleet=limit, commitments=promised, relative_gap=1e-3) | members


def _nudged(document: Document, seed: int) -> Document:
    """Change every price a little."""
    draw = random.Random(seed)
    window = dict(document["window"])
    for name in ("price_per_mwh", "buy_price_per_mwh", "sell_price_per_mwh"):
        if isinstance(window.get(name), list):
            window[name] = [round(price + draw.uniform(-2, 2), 2) for price in window[name]]
    return document | {"window": window}


def _compare(seed: int, method: str, gap: float) -> str:
    """Plan a random request, nudge its prices, and plan that cold and from the first schedule."""
    document = mixed_request(seed, assets=2, intervals=5) | {"method": method, "relative_gap": gap}
    first = answer(document)
    if not isinstance(first, Schedule):
        return str(first.outcome)
    later = _nudged(document, seed)
    cold, warm = answer(later), again(later, first)
    assert isinstance(cold, Schedule), f"seed {seed}"
    assert isinstance(warm, Schedule), f"seed {seed}"
    assert warm.verification.violations == []
    assert cold.margin_bound is not None
    assert warm.margin_bound is not None
    slack = 3 * gap * max(1.0, abs(cold.margin)) + ROUND_OFF
    assert warm.margin <= cold.margin_bound + slack, f"seed {seed}"
    assert cold.margin <= warm.margin_bound + slack, f"seed {seed}"
    if method != "cp_sat":
        assert warm.outcome == cold.outcome == "optimal", f"seed {seed}"
        assert warm.margin == pytest.approx(cold.margin, abs=slack), f"seed {seed}"
    return "planned"


@pytest.mark.parametrize(("method", "gap"), [("milp", GAP), ("cp_sat", CP_SAT_GAP)])
def test_a_tenth_of_the_mixed_requests_have_the_same_margin_from_an_earlier_schedule(method: str, gap: float) -> None:
    seen = Counter(_compare(seed, method, gap) for seed in range(MIXED // 10))
    assert seen["planned"] > MIXED // 20


@pytest.mark.full
@pytest.mark.parametrize(("method", "gap"), [("milp", GAP), ("cp_sat", CP_SAT_GAP)])
def test_all_mixed_requests_have_the_same_margin_from_an_earlier_schedule(method: str, gap: float) -> None:
    seen = Counter(_compare(seed, method, gap) for seed in range(MIXED))
    print(dict(seen))
    assert seen["planned"] > MIXED // 2


def _jointly(instance: Instance, seconds: float, earlier: Any = None) -> Solution:
    limits = Limits(100.0, 1, monotonic())
    return solve_jointly(instance, limits, Unwatched(), seed=0, seconds=seconds, earlier=earlier)


def test_an_earlier_optimum_is_proven_by_the_relaxation_with_no_further_search() -> None:
    instance = instance_of(indexed(fleet()))
    with counted() as cold:
        first = _jointly(instance, 60.0)
    with counted() as warm:
        second = _jointly(instance, 60.0, first.plans)
    assert first.stopped is second.stopped is Stopped.WITHIN_GAP
    assert second.margin == pytest.approx(first.margin, rel=1e-3)
    # The one left has every power given, to learn which intervals count.
    assert warm["mip"] == 1 <= cold["mip"]


def test_cp_sat_is_not_asked_where_the_relaxation_proves_an_earlier_schedule() -> None:
    document = fleet()
    instance, limits = instance_of(indexed(document)), Limits(100.0, 1, monotonic())
    first = _jointly(instance, 60.0)
    with counted() as seen:
        found = solve_by_cp_sat(instance, limits, Unwatched(), seed=0, seconds=60.0, earlier=first.plans)
    assert found.stopped is Stopped.WITHIN_GAP
    assert found.margin is not None
    assert first.margin is not None
    assert found.margin >= first.margin - ROUND_OFF
    assert seen["cp_sat"] == 0


def test_cp_sat_is_hinted_at_an_earlier_schedule_that_is_not_proven() -> None:
    instance, limits = instance_of(indexed(fleet(relative_gap=1e-7))), Limits(100.0, 1, monotonic())
    other_day = fleet(window=fleet()["window"] | {"price_per_mwh": DAY[::-1]})
    of_another_day = _jointly(instance_of(indexed(other_day)), 60.0).plans
    hints = []
    real = cp_sat.solve

    def noting(*arguments: Any, hint: Any = None, **named: Any) -> Any:
        hints.append(hint)
        return real(*arguments, hint=hint, **named)

    with patch.object(cp_sat, "solve", noting):
        solve_by_cp_sat(instance, limits, Unwatched(), seed=0, seconds=3.0, earlier=of_another_day)
    assert len(hints) == 2
    assert all(hint is not None and np.isfinite(hint).all() for hint in hints)


@pytest.mark.parametrize("seconds", [0.0, 1e-3])
@pytest.mark.parametrize("whom", ["coupled", "alone", "without whole numbers"])
def test_with_no_time_to_search_the_earlier_schedule_is_returned_no_worse(seconds: float, whom: str) -> None:
    if whom == "coupled":
        document = fleet()
    elif whom == "alone":
        document = job(DAY, store(), commitments=[hours({"assets": ["quay-b1"]}, 3, 0.5)])
    else:
        document = job(DAY, store())
    instance = instance_of(indexed(document))
    first = _jointly(instance, 60.0)
    later = _jointly(instance, seconds, first.plans)
    assert later.plans is not None
    assert later.margin is not None
    assert first.margin is not None
    assert later.margin >= first.margin - 1e-6 * abs(first.margin)


def test_parts_that_time_leaves_out_keep_what_they_did() -> None:
    assets = [store(f"quay-b{k}") for k in range(4)]
    document = job(DAY, *assets, commitments=[hours({"assets": ["quay-b2"]}, 3, 0.5)])
    first = planned(document)
    read = read_job(document)
    late = iter([0.0])
    found = plan(read, Limits(10.0, 1, 0.0, clock=lambda: next(late, 9.2)), earlier=first)
    assert isinstance(found, Schedule)
    assert found.margin == pytest.approx(first.margin)
    assert found.outcome == "feasible"


def test_an_earlier_schedule_over_a_limit_is_not_returned() -> None:
    before = planned(fleet())
    tight = fleet(fleet=fleet()["fleet"] | {"export_limit_mw": 0.9})
    assert max(sum(power) for power in zip(*(power_of(before, f"quay-b{k}") for k in range(3)), strict=True)) > 0.9
    found = again(tight, before)
    assert isinstance(found, Schedule)
    assert found.margin == pytest.approx(planned(tight).margin, rel=2e-3)
    assert found.fleet.power_mw == pytest.approx(np.minimum(found.fleet.power_mw, 0.9), abs=1e-6)


def test_an_earlier_schedule_of_a_request_that_cannot_be_met_any_more_changes_nothing() -> None:
    before = planned(fleet())
    found = again(fleet(commitments=[hours({"assets": ["quay-b0"]}, 9, 1.0)]), before)
    assert isinstance(found, Diagnosis)


def test_an_earlier_schedule_of_other_plants_or_another_length_is_passed_over() -> None:
    before = planned(fleet())
    with_more = fleet()
    with_more["fleet"] = with_more["fleet"] | {"assets": [*with_more["fleet"]["assets"], store("quay-b9")]}
    with_more["initial"] = with_more["initial"] | {"quay-b9": {"stored_mwh": 0.0}}
    assert again(with_more, before).outcome == "optimal"
    shorter = planned(job(DAY[:5], *fleet()["fleet"]["assets"], stored=1.0))
    instance = instance_of(indexed(fleet()))
    assert plans_for(instance, earlier_of(instance, shorter.assets)) is None
    assert again(fleet(), shorter).margin == pytest.approx(before.margin, rel=2e-3)


def test_an_earlier_power_that_is_no_number_is_passed_over() -> None:
    instance = instance_of(indexed(fleet()))
    first = _jointly(instance, 60.0).plans
    assert first is not None
    broken = UnitPlan(np.full(len(DAY), np.nan), None, {})
    found = _jointly(instance, 60.0, (broken, *first[1:]))
    assert found.stopped is Stopped.WITHIN_GAP


def test_a_commitment_of_units_is_kept_when_the_load_moves_a_little() -> None:
    reserve = REFERENCE["reserve_fraction"]
    before = planned(system(10, reserve))
    document = system(10, reserve)
    load = [round(mw * 1.001, 3) for mw in document["forecasts"]["town"]]
    moved = document | {"forecasts": {"town": load}, "commitments": []}
    instance = instance_of(indexed(moved))
    start = plans_for(instance, earlier_of(instance, before.assets))
    assert start is not None
    kept = _jointly(instance, 0.0, start)
    assert kept.plans is not None
    assert [plan.is_on.tolist() for plan in kept.plans if plan.is_on is not None] == [
        plan.is_on.tolist() for plan in start if plan.is_on is not None
    ]


def test_a_plan_that_is_told_to_stop_begins_nothing_more() -> None:
    before = planned(fleet())
    watch = StoppableWatch()
    watch.ask_stop()
    read = read_job(fleet())
    assert plan(read, Limits.of(read, NOW), watch, earlier=before).outcome in {"undecided", "feasible", "optimal"}
