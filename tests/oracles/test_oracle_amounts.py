"""Check the oracle's commitments on hours, power, energy and reserve, and reserve itself, against exhaustion."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from tests.oracles import formulation_commitments, formulation_deliveries, formulation_reserve, formulation_storage
from tests.oracles.classic import enumerate_best
from tests.oracles.formulation import solve
from tests.oracles.formulation_reserve import Reserve
from tests.oracles.formulation_row import Row
from tests.oracles.replay_store import HOURS, KINDS, LEVELS_MW, margin_by_replay, on_off_store_job

SEEDS = range(120)


def agrees(seed: int) -> bool:
    """Tell whether oracle and exhaustion come to the same answer."""
    request = on_off_store_job(seed)
    expected = enumerate_best(LEVELS_MW, HOURS, lambda powers: margin_by_replay(request, powers))
    answer = solve(request, gap=1e-9)
    if expected is None or answer.margin is None:
        return expected is None and answer.outcome == "infeasible"
    return answer.margin == pytest.approx(expected, abs=1e-5)


@pytest.mark.parametrize("seed", SEEDS)
def test_oracle_agrees_with_exhaustion_on_every_kind_of_commitment(seed: int) -> None:
    assert agrees(seed)


def test_exhausted_jobs_hold_every_kind_met_and_not_met() -> None:
    jobs = [on_off_store_job(seed) for seed in SEEDS]
    kinds = [(job["commitments"][0]["kind"], solve(job).outcome) for job in jobs]
    assert all(kinds.count((kind, "optimal")) >= 8 for kind in KINDS)
    assert sum(outcome == "infeasible" for _, outcome in kinds) >= 6


def _power_itself(_: Any, power: Any) -> Any:
    return power


def _no_direction(reserve: Reserve, _: str) -> list[str]:
    return [key for key, sold in reserve.products.items() if sold["direction"] != "symmetric"]


FAULTS: dict[str, tuple[Any, str, Any]] = {
    "blocks are single intervals": (formulation_reserve, "_block", lambda _clock, interval, _hours: interval),
    "reserve needs no power or energy": (formulation_storage, "_deliverable", lambda *_: None),
    "symmetric reserve counts in no direction": (Reserve, "_in", _no_direction),
    "charging lowers energy delivered": (formulation_deliveries, "positive_part_from_below", _power_itself),
    "headroom is forgotten": (Row, "headroom_mw", 0.0),
    "reserve holding is not asked": (formulation_commitments, "add_reserve_holding", lambda *_: None),
    "firm delivery is not asked": (formulation_commitments, "add_firm_delivery", lambda *_: None),
    "the most is no limit on energy": (formulation_commitments, "add_energy_at_most", lambda *_: None),
    "the most is no limit on hours": (formulation_commitments, "add_hours_at_most", lambda *_: None),
}


@pytest.mark.parametrize("fault", FAULTS)
def test_planted_fault_is_noticed(fault: str, monkeypatch: pytest.MonkeyPatch) -> None:
    owner, name, wrong = FAULTS[fault]
    monkeypatch.setattr(owner, name, wrong)
    assert not all(agrees(seed) for seed in SEEDS)


def test_credit_that_is_not_counted_is_noticed(monkeypatch: pytest.MonkeyPatch) -> None:
    rows: Callable[..., list[Row]] = formulation_commitments._rows

    def without_credit(job: Any, *arguments: Any) -> list[Row]:
        return rows({key: value for key, value in job.items() if key != "counted_before"}, *arguments)

    monkeypatch.setattr(formulation_commitments, "_rows", without_credit)
    assert not all(agrees(seed) for seed in SEEDS)
