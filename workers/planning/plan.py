"""From a job to its answer: a function of its arguments, with no queue and no web."""

from math import isfinite

import numpy as np

from schemas.diagnosis import Diagnosis
from schemas.job import CheckJob, Job, ScheduleJob
from schemas.schedule import Schedule, Undecided, Violation
from schemas.support import require_supported
from workers.planning import answer
from workers.planning.assembly import UnitPlan
from workers.planning.audit import Decision, Replay, replay
from workers.planning.extraction import decision_of
from workers.planning.instance import Instance, instance_of
from workers.planning.limits import Limits, Unwatched, Watch
from workers.planning.methods import Choice, Found, choose, solve
from workers.planning.screening import Finding, screen

Answer = Schedule | Diagnosis | Undecided

ROUND_OFF = 1e-6
"""Margins may differ by this share through round-off and the audit's tolerance; by more, a fault is ours."""


class PlanningError(Exception):
    """Our own fault: a schedule that the audit refuses, or a margin above its bound; carries the evidence."""

    def __init__(self, what: str, violations: list[Violation]) -> None:
        super().__init__(what, violations)
        self.what = what
        self.violations = violations


def plan(job: Job, limits: Limits, watch: Watch | None = None) -> Answer:
    """Plan a validated job whose documents are inline.

    Raises Unsupported for what cannot be planned yet, PlanningError where no answer can be trusted. Infeasible and out
    of time are answers.
    """
    require_supported(job)
    if isinstance(job, CheckJob):
        return _checked(job, limits)
    if not isinstance(job, ScheduleJob):
        raise ValueError(f"the task {job.task} passed as supported, but nothing here does it")
    watch = watch or Unwatched()
    watch.progress("indexing", 0.0)
    instance = instance_of(job)
    if findings := screen(instance):
        return _refused(job, findings)
    choice = choose(instance, job.method)
    watch.progress("solving", 0.0)
    found = solve(choice, limits, watch, seed=job.seed)
    if found.infeasible_parts:
        return _proven_infeasible(job, found.infeasible_parts)
    if not found.has_schedule:
        return _undecided(job, found, limits)
    watch.progress("auditing", 1.0)
    return _audited(job, choice, found, limits, watch)


def _audited(job: ScheduleJob, choice: Choice, found: Found, limits: Limits, watch: Watch) -> Schedule:
    """Let the audit judge; what it refuses is solved once more with every mode apart, and never returned."""
    replayed = replay(job, _decisions(found))
    if replayed.verification.violations:
        again = solve(choice, limits, watch, seed=job.seed, careful=True)
        found = again if again.has_schedule else found
        replayed = replay(job, _decisions(found))
    if replayed.verification.violations:
        raise PlanningError("the audit refuses every schedule found", replayed.verification.violations)
    _require_margin(replayed, found)
    bound = _bound_above(replayed, found.bound)
    gap = None if bound is None else bound - replayed.margin
    is_optimal = gap is not None and (
        gap <= job.absolute_gap or answer.relative_gap(replayed, replayed.margin + gap) <= job.relative_gap * (1 + 1e-6)
    )
    return answer.schedule(
        job, replayed, "optimal" if is_optimal else "feasible", bound, _effort(choice, found, limits)
    )


def _decisions(found: Found) -> dict[str, Decision]:
    decisions = {}
    for part, solution in zip(found.choice.parts, found.solutions, strict=True):
        for unit, planned in zip(part.units, solution.plans or (), strict=True):
            decisions[unit.id] = decision_of(part, unit, planned)
    return decisions


def _slack(replayed: Replay) -> float:
    """Give how far round-off and the audit's tolerance may move a margin, in money."""
    turnover = abs(replayed.totals.sales) + abs(replayed.totals.purchases)
    return ROUND_OFF * max(1.0, abs(replayed.margin), turnover)


def _require_margin(replayed: Replay, found: Found) -> None:
    """Refuse a schedule that earns less than the model said: the model's money is wrong, and so is its bound.

    More than that is possible: within its gap a model may pay for a shortfall or a peak that is not there.
    """
    claimed = sum(solution.margin or 0.0 for solution in found.solutions)
    if replayed.margin < claimed - _slack(replayed):
        raise PlanningError(f"the schedule earns {replayed.margin}, the model said {claimed}", [])


def _bound_above(replayed: Replay, bound: float) -> float | None:
    """Give the bound, lifted over the margin where only round-off separates them."""
    if not isfinite(bound):
        return None
    if replayed.margin > bound + _slack(replayed):
        raise PlanningError(f"the margin {replayed.margin} lies above its bound {bound}", [])
    return max(bound, replayed.margin)


def _effort(choice: Choice, found: Found, limits: Limits) -> answer.Effort:
    return answer.Effort(
        method=choice.method,
        why=found.why,
        threads=limits.threads,
        solver_seconds=sum(solution.solver_seconds for solution in found.solutions),
        build_seconds=sum(solution.build_seconds for solution in found.solutions),
    )


def _refused(job: ScheduleJob, findings: list[Finding]) -> Diagnosis:
    return answer.diagnosis(
        job, " ".join(finding.sentence for finding in findings), [finding.members for finding in findings]
    )


def _proven_infeasible(job: ScheduleJob, parts: list[Instance]) -> Diagnosis:
    """Name what is asked of the assets that cannot meet it."""
    conflicts = [_asked(job, part) for part in parts]
    names = [", ".join(unit.id for unit in part.units) for part in parts]
    sentence = " ".join(
        f"No schedule of {who} meets all that is asked of it within its limits: {'; '.join(text for _, text in asked)}."
        for who, asked in zip(names, conflicts, strict=True)
    )
    return answer.diagnosis(job, sentence, conflicts)


def _asked(job: ScheduleJob, part: Instance) -> list[tuple[str, str]]:
    binding = {row.commitment: row for row in part.rows if row.price is None}
    commitments = [
        (row.pointer, f"commitment {job.commitments[number].id} ({job.commitments[number].kind})")
        for number, row in sorted(binding.items())
    ]
    targets = [
        (f"/targets/{store.id}/final_stored_mwh", f"{store.id} ends with at least {store.final_floor_mwh:g} MWh")
        for store in part.stores
        if store.final_floor_mwh > 0
    ]
    return commitments + targets


def _undecided(job: ScheduleJob, found: Found, limits: Limits) -> Undecided:
    """Hand over what is proven, and the attempt in hand: planned where a plan was found, idle elsewhere."""
    decisions = {}
    for part, solution in zip(found.choice.parts, found.solutions, strict=True):
        nothing = UnitPlan(np.zeros(part.intervals), None, {})
        for unit, planned in zip(part.units, solution.plans or [nothing] * len(part.units), strict=True):
            decisions[unit.id] = decision_of(part, unit, planned)
    bound = found.bound if isfinite(found.bound) else None
    attempt = answer.schedule(job, replay(job, decisions), "violated", bound, _effort(found.choice, found, limits))
    summary = f"{limits.seconds:g} s were not enough to find a schedule or to prove that there is none."
    return answer.undecided(job, summary, bound, attempt)


def _checked(job: CheckJob, limits: Limits) -> Schedule:
    """Recompute a schedule that is already there."""
    count = job.window.intervals if job.window is not None else 0
    decisions = {}
    for asset in job.schedule.assets:
        power = asset.power_mw if isinstance(asset.power_mw, list) else [asset.power_mw] * count
        reserve = {
            product: held if isinstance(held, list) else [held] * count
            for product, held in (asset.reserve_mw or {}).items()
        }
        decisions[asset.id] = Decision(power_mw=power, on=asset.on, reserve_mw=reserve)
    replayed = replay(job, decisions)
    return answer.schedule(
        job,
        replayed,
        "violated" if replayed.verification.violations else "feasible",
        None,
        answer.Effort(None, "a check solves nothing", limits.threads),
    )
