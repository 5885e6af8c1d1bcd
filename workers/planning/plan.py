"""From a job to its answer: a function of its arguments, with no queue and no web."""

from dataclasses import replace
from math import isfinite

import numpy as np

from schemas.diagnosis import Diagnosis, NearestSchedule
from schemas.job import CheckJob, CommitmentCostsJob, Job, ScheduleJob
from schemas.schedule import Schedule, Undecided
from schemas.support import require_supported
from workers.planning import answer
from workers.planning.assembly import UnitPlan
from workers.planning.audit import Decision, replay
from workers.planning.diagnosis.diagnose import Findings, diagnose
from workers.planning.diagnosis.feasibility import Solving
from workers.planning.diagnosis.report import diagnosis_of, nearest_schedule
from workers.planning.diagnosis.scope import Question
from workers.planning.earlier import earlier_of
from workers.planning.extraction import decision_of
from workers.planning.instance import Instance, instance_of
from workers.planning.limits import Limits, Unwatched, Watch
from workers.planning.methods import Found, choose, solve
from workers.planning.pricing.report import limits_to_search, prices_of, with_prices
from workers.planning.proof import Audited, PlanningError, audited, decisions_of
from workers.planning.screening import screen

__all__ = ["Answer", "PlanningError", "plan"]

Answer = Schedule | Diagnosis | Undecided


def plan(job: Job, limits: Limits, watch: Watch | None = None, *, earlier: Schedule | None = None) -> Answer:
    """Plan a validated job whose documents are inline; the search begins from an `earlier` schedule where that fits.

    Raises Unsupported for what cannot be planned yet, PlanningError where no answer can be trusted. Infeasible and out
    of time are answers.
    """
    require_supported(job)
    if isinstance(job, CheckJob):
        return _checked(job, limits)
    if not isinstance(job, ScheduleJob | CommitmentCostsJob):
        raise ValueError(f"the task {job.task} passed as supported, but nothing here does it")
    watch = watch or Unwatched()
    watch.progress("indexing", 0.0)
    asked = answer.as_schedule_job(job)
    instance = instance_of(asked)
    choice = choose(instance, asked.method)
    if screen(instance):
        prices = prices_of(job, choice, None, limits, watch)
        return with_prices(_diagnosed(asked, instance, [], limits, watch), prices)
    watch.progress("solving", 0.0)
    start = None if earlier is None else earlier_of(instance, earlier.assets)
    found = solve(choice, limits_to_search(job, limits), watch, seed=job.seed, earlier=start)
    if found.infeasible_parts:
        prices = prices_of(job, choice, found, limits, watch)
        return with_prices(_diagnosed(asked, instance, found.infeasible_parts, limits, watch), prices)
    if not found.has_schedule:
        return _undecided(job, found, limits)
    watch.progress("auditing", 1.0)
    proof = audited(asked, found, limits, watch)
    return with_prices(_schedule(job, proof, limits), prices_of(job, choice, proof, limits, watch))


def _schedule(job: ScheduleJob | CommitmentCostsJob, proof: Audited, limits: Limits) -> Schedule:
    """Write down a schedule that the audit passed, and whether its bound lies within the gap asked for."""
    replayed, bound = proof.replayed, proof.bound
    gap = None if bound is None else bound - replayed.margin
    is_optimal = gap is not None and (
        gap <= job.absolute_gap or answer.relative_gap(replayed, replayed.margin + gap) <= job.relative_gap * (1 + 1e-6)
    )
    return answer.schedule(job, replayed, "optimal" if is_optimal else "feasible", bound, _effort(proof.found, limits))


def _effort(found: Found, limits: Limits) -> answer.Effort:
    return answer.Effort(
        method=found.choice.method,
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

    def planned(changed: ScheduleJob, found: Found) -> Schedule:
        return _schedule(changed, audited(changed, found, again, watch), again)

    proven = [tuple(unit.id for unit in part.units) for part in infeasible]
    found = diagnose(Question(job, instance), proven, planned, solving)
    nearest, no_nearest = _nearest(job, found, again)
    return diagnosis_of(found, nearest, no_nearest)


def _nearest(job: ScheduleJob, found: Findings, limits: Limits) -> tuple[NearestSchedule | None, str | None]:
    """Audit the nearest schedule by the request relaxed by what it lists as missing; else say why there is none."""
    near = found.nearest
    if near is None:
        return None, found.no_nearest or "Time did not suffice to find it."
    replayed = replay(near.job, decisions_of(near.found))
    if violations := replayed.verification.violations:
        return None, f"The audit refuses the one that was found, a fault of the planner: {violations[0].text}."
    effort = _effort(near.found, limits)
    return nearest_schedule(answer.schedule(job, replayed, "infeasible", None, effort), near.missing), None


def _undecided(job: ScheduleJob | CommitmentCostsJob, found: Found, limits: Limits) -> Undecided:
    """Hand over what is proven, and the attempt in hand: planned where a plan was found, idle elsewhere."""
    decisions = {}
    for part, solution in zip(found.choice.parts, found.solutions, strict=True):
        nothing = UnitPlan(np.zeros(part.intervals), None, {})
        for unit, planned in zip(part.units, solution.plans or [nothing] * len(part.units), strict=True):
            decisions[unit.id] = decision_of(part, unit, planned)
    bound = found.bound if isfinite(found.bound) else None
    attempt = answer.schedule(job, replay(job, decisions), "violated", bound, _effort(found, limits))
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
