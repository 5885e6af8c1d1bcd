"""Whether anything is possible at all: whichever solver says so, the oracle and the audit agree."""

from collections import Counter
from dataclasses import replace
from time import monotonic
from typing import Any

import pytest

from schemas.diagnosis import Diagnosis
from tests.oracles.formulation import solve
from tests.oracles.random_hours import tight_request
from tests.workers.planning.jobs import answer, hours, indexed, job, outage, store
from workers.planning import joint
from workers.planning.audit import replay
from workers.planning.diagnosis import repairs
from workers.planning.diagnosis.feasibility import CutShort, Solving
from workers.planning.extraction import decision_of
from workers.planning.instance import instance_of
from workers.planning.limits import Limits, StoppableWatch, Unwatched, Watch
from workers.planning.rows import HoursRow
from workers.planning.solvers import cp_sat, highs
from workers.planning.solvers.ending import Ending, Stopped

Document = dict[str, Any]

SEEDS = range(40)


def solving(watch: Watch | None = None) -> Solving:
    """Return a minute for questions."""
    return Solving(Limits(60.0, 1, monotonic()), watch or Unwatched(), 0, monotonic() + 60.0)


def _wrong(seed: int, seen: Counter[str]) -> list[str]:
    """Ask about one store with least powers, runs, ramps or blocks; a schedule that is given must pass the audit."""
    document = tight_request(seed, is_particular=True)
    asked = indexed(document)
    instance = instance_of(asked)
    found, oracle = solving().possible(instance), solve(document, gap=1e-6)
    seen[f"{found.is_possible}"] += 1
    wrong = [] if found.is_possible is (oracle.outcome == "optimal") else [f"seed {seed}: oracle {oracle.outcome}"]
    if found.plans:
        seen["schedules"] += 1
        decisions = {unit.id: decision_of(instance, unit, found.plans[unit.id]) for unit in instance.units}
        wrong += [f"seed {seed}: {each.text}" for each in replay(asked, decisions).verification.violations]
    return wrong


@pytest.mark.parametrize("moment", [joint.MOMENT, 0.0])
def test_particular_stores_are_judged_as_the_oracle_does(moment: float, monkeypatch: pytest.MonkeyPatch) -> None:
    # without a moment for HiGHS all that the LP relaxation leaves open is CP-SAT's
    monkeypatch.setattr(joint, "MOMENT", moment)
    asked: list[bool] = []
    true_solve = cp_sat.solve

    def counting(*given: Any, **named: Any) -> Ending:
        asked.append(named["near"])
        return true_solve(*given, **named)

    monkeypatch.setattr(cp_sat, "solve", counting)
    seen: Counter[str] = Counter()
    wrong = [fault for seed in SEEDS for fault in _wrong(seed, seen)]
    print(f"seeds {SEEDS.start}-{SEEDS.stop - 1}: {dict(seen)}, CP-SAT asked {len(asked)} times")
    assert not wrong, "\n".join(wrong)
    assert min(seen["True"], seen["False"], seen["schedules"]) > len(SEEDS) // 8
    assert moment > 0 or {True, False} == set(asked)


def test_several_stores_are_left_to_highs(monkeypatch: pytest.MonkeyPatch) -> None:
    def never(*_: Any, **__: Any) -> Ending:
        raise AssertionError("CP-SAT was asked")

    monkeypatch.setattr(joint, "MOMENT", 0.0)
    monkeypatch.setattr(cp_sat, "solve", never)
    whom = {"group": ["quay-b1", "quay-b2"]}
    two = job([10.0] * 4, store(min_discharge_mw=0.6), store("quay-b2", min_discharge_mw=0.6), stored=1.0)
    asked = two | {"commitments": [hours(whom, 2, 1.3)]}
    assert solving().is_possible(instance_of(indexed(asked)))


def test_sizes_beyond_whole_steps_come_back_to_highs(monkeypatch: pytest.MonkeyPatch) -> None:
    def beyond(*_: Any, **__: Any) -> Ending:
        raise cp_sat.BeyondWholeSteps("sums would leave 64 bits")

    monkeypatch.setattr(joint, "MOMENT", 0.0)
    monkeypatch.setattr(cp_sat, "solve", beyond)
    seen: Counter[str] = Counter()
    assert not [fault for seed in SEEDS for fault in _wrong(seed, seen)]
    assert min(seen["True"], seen["False"]) > 0


def test_nothing_is_said_when_there_is_no_time_or_a_stop_is_asked() -> None:
    instance = instance_of(indexed(job([10.0] * 2, store(), stored=1.0)))
    watch = StoppableWatch()
    watch.ask_stop()
    for late in (Solving(Limits(60.0, 1, monotonic()), Unwatched(), 0, monotonic()), solving(watch)):
        with pytest.raises(CutShort):
            late.is_possible(instance)


def _particular() -> Document:
    """Return a store with least powers, a ramp and blocks that an outage keeps from half of its hours."""
    asked = [hours({"assets": ["quay-b1"]}, 4, 0.5, min_block_hours=2.0)]
    bound = store(min_discharge_mw=0.3, min_charge_mw=0.3, ramp_mw_per_hour=0.9, charge_efficiency=0.9)
    trip = outage("quay-b1", 2, 6) | {"kind": "planned"}
    return job([10.0, 30, 20, 50, 10, 40, 15, 60], bound, stored=0.5, commitments=asked, outages=[trip])


def _diagnosed(document: Document) -> Diagnosis:
    found = answer(document)
    assert isinstance(found, Diagnosis)
    return found


def test_a_repair_is_offered_even_if_its_planning_has_no_time_to_search(monkeypatch: pytest.MonkeyPatch) -> None:
    # what showed that the change cures is a schedule already, and the LP relaxation has a bound for it
    whole = _diagnosed(_particular())
    true_solve = highs.solve

    def hurried(matrix: highs.Matrix, effort: highs.Effort, watch: Watch) -> Ending:
        if matrix.integer.any() and effort.relative_gap == repairs.GAP:
            return Ending(Stopped.OUT_OF_TIME, None, None, float("inf"), 0.0)
        return true_solve(matrix, effort, watch)

    monkeypatch.setattr(highs, "solve", hurried)
    found = _diagnosed(_particular())
    assert {repair.text for repair in found.repairs} == {repair.text for repair in whole.repairs}
    assert all(repair.margin_bound >= repair.margin for repair in found.repairs)
    assert len(found.repairs) > 2


def test_hours_that_are_not_proven_to_be_the_most_are_a_repair_and_no_figure(monkeypatch: pytest.MonkeyPatch) -> None:
    whole = _diagnosed(_particular())
    assert [row.attainable_hours for row in whole.attainable] == [2.0]
    true_solve = highs.solve

    def unproven(matrix: highs.Matrix, effort: highs.Effort, watch: Watch) -> Ending:
        ending = true_solve(matrix, effort, watch)
        if matrix.integer.any() and effort.relative_gap == 1e-9 and effort.absolute_gap > 0.5:
            return replace(ending, stopped=Stopped.OUT_OF_TIME, bound=0.0)
        return ending

    monkeypatch.setattr(highs, "solve", unproven)
    found = _diagnosed(_particular())
    assert found.attainable == []
    assert "how far each commitment can be met" in found.cut_off
    assert not found.complete
    assert {repair.text for repair in found.repairs} == {repair.text for repair in whole.repairs}


def test_a_step_that_takes_too_long_to_be_judged_gives_way_to_a_larger_one(monkeypatch: pytest.MonkeyPatch) -> None:
    # two hours of charging at 0.6 MW are 1.2 MWh for four hours: 0.3 MW, and 0.2 where more takes too long
    asked = hours({"assets": ["quay-b1"]}, 4, 0.5, **{"from": "2027-02-09T01:00:00Z"})
    weak = store(min_discharge_mw=0.1, min_charge_mw=0.1, charge_limit_mw=0.6)
    document = job([10.0] * 6, weak, commitments=[asked])
    whole = _diagnosed(document)
    assert whole.cut_off == []
    true_possible = Solving.possible

    def slow(self: Solving, instance: Any, most: float = float("inf")) -> Any:
        if most < float("inf") and any(isinstance(row, HoursRow) and row.threshold_mw > 0.2 for row in instance.rows):
            raise CutShort("too long")
        return true_possible(self, instance, most)

    monkeypatch.setattr(Solving, "possible", slow)
    found = _diagnosed(document)
    assert found.cut_off == ["whether smaller or other changes would do"]
    assert not found.complete
    lowered = [repair for repair in found.repairs if repair.change.pointer.endswith("threshold/mw")]
    least = [repair for repair in whole.repairs if repair.change.pointer.endswith("threshold/mw")]
    assert [repair.change.to for repair in lowered] == [0.2]
    assert [repair.change.to for repair in least] == [0.3]


def test_hours_that_turn_out_to_be_more_take_the_place_of_a_repair_with_fewer(monkeypatch: pytest.MonkeyPatch) -> None:
    true_solve, asked = highs.solve, []

    def poor_at_first(matrix: highs.Matrix, effort: highs.Effort, watch: Watch) -> Ending:
        if not (matrix.integer.any() and effort.relative_gap == 1e-9 and effort.absolute_gap > 0.5):
            return true_solve(matrix, effort, watch)
        asked.append(matrix)
        if len(asked) > 1:
            return true_solve(matrix, effort, watch)
        worst = true_solve(replace(matrix, money=-matrix.money), effort, watch)
        assert worst.values is not None
        margin = float(matrix.money @ worst.values) + matrix.constant
        return replace(worst, stopped=Stopped.OUT_OF_TIME, margin=margin, bound=0.0)

    def slow(self: Solving, instance: Any, most: float = float("inf")) -> Any:
        if most < float("inf"):
            raise CutShort("too long")
        return true_possible(self, instance, most)

    true_possible = Solving.possible
    monkeypatch.setattr(highs, "solve", poor_at_first)
    monkeypatch.setattr(Solving, "possible", slow)
    found = _diagnosed(_particular())
    assert len(asked) == 2
    assert [row.attainable_hours for row in found.attainable] == [2.0]
    assert [(repair.change.pointer, repair.change.to) for repair in found.repairs] == [("/commitments/0/hours", 2.0)]
    assert found.cut_off == ["whether smaller or other changes would do"]
