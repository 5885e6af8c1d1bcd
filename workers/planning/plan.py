"""From a job to its answer: a function of its arguments, with no queue and no web."""

from dataclasses import replace
from math import isfinite

import numpy as np

from schemas.diagnosis import Diagnosis, NearestSchedule
from schemas.job import CheckJob, Job, ScheduleJob
from schemas.schedule import Schedule, Undecided, Violation
from schemas.support import require_supported
from workers.planning import answer
from workers.planning.assembly import UnitPlan
from workers.planning.audit import Decision, Replay, replay
from workers.planning.diagnosis.diagnose import Findings, diagnose
from workers.planning.diagnosis.feasibility import Solving
from workers.planning.diagnosis.report import diagnosis_of, nearest_schedule
from workers.planning.diagnosis.scope import Question
from workers.planning.earlier import earlier_of
from workers.planning.extraction import decision_of
from workers.planning.instance import Instance, instance_of
from workers.planning.limits import Limits, Unwatched, Watch
from workers.planning.methods import Choice, Found, choose, solve
from workers.planning.screening import screen

Answer = Schedule | Diagnosis | Undecided

ROUND_OFF = 1e-6
"""Margins may differ by this share through round-off and the audit's tolerance; by more, a fault is ours."""


class PlanningError(Exception):
    """Our own fault: a schedule that the audit refuses, or a margin above its bound; carries the evidence."""

    def __init__(self, what: str, violations: list[Violation]) -> None:
        super().__init__(what, violations)
        self.what = what
        self.violations = violations


def plan(job: Job, limits: Limits, watch: Watch | None = None, *, earlier: Schedule | None = None) -> Answer:
    """Plan a validated job whose documents are inline; the search begins from an `earlier` schedule where that fits.

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
    if screen(instance):
        return _diagnosed(job, instance, [], limits, watch)
    choice = choose(instance, job.method)
    watch.progress("solving", 0.0)
    start = None if earlier is None else earlier_of(instance, earlier.assets)
    found = solve(choice, limits, watch, seed=job.seed, earlier=start)
    if found.infeasible_parts:
        return _diagnosed(job, instance, found.infeasible_parts, limits, watch)
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


def _diagnosed(
    job: ScheduleJob, instance: Instance, infeasible: list[Instance], limits: Limits, watch: Watch
) -> Diagnosis:
    """Find out why a job cannot be met, in as much time again as it had."""
    again = replace(limits, started=limits.clock())
    watch.more_time(again.seconds)
    solving = Solving(again, watch, job.seed, again.clock() + again.left_to_solve())

    def audited(changed: ScheduleJob, choice: Choice, found: Found) -> Schedule:
        return _audited(changed, choice, found, again, watch)

    proven = [tuple(unit.id for unit in part.units) for part in infeasible]
    found = diagnose(Question(job, instance), proven, audited, solving)
    nearest, no_nearest = _nearest(job, found, again)
    return diagnosis_of(found, nearest, no_nearest)


def _nearest(job: ScheduleJob, found: Findings, limits: Limits) -> tuple[NearestSchedule | None, str | None]:
    """Audit the nearest schedule by the request relaxed by what it lists as missing; else say why there is none."""
    near = found.nearest
    if near is None:
        return None, found.no_nearest or "Time did not suffice to find it."
    replayed = replay(near.job, _decisions(near.found))
    if replayed.verification.violations:
        raise PlanningError("the audit refuses the nearest schedule", replayed.verification.violations)
    effort = _effort(near.choice, near.found, limits)
    return nearest_schedule(answer.schedule(job, replayed, "infeasible", None, effort), near.missing), None


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
