"""From an audited replay to the documents of the contract."""

import hashlib
from dataclasses import dataclass
from functools import cache
from importlib.metadata import version

from schemas.assumptions import assumptions
from schemas.cautions import CAUTIONS
from schemas.job import CheckJob, CommitmentCostsJob, Job, ScheduleJob
from schemas.reading import canonical
from schemas.schedule import Outcome, Provenance, Schedule, Undecided
from workers.planning.audit import Replay

PlannedJob = ScheduleJob | CommitmentCostsJob | CheckJob
"""The tasks that are planned so far; all on one window."""

LIBRARIES = ("hourwright", "highspy", "ortools", "pyomo")


def as_schedule_job(job: ScheduleJob | CommitmentCostsJob) -> ScheduleJob:
    """Take what a job asks to be scheduled; everything was validated as a part of the job."""
    if isinstance(job, ScheduleJob):
        return job
    members = {name: getattr(job, name) for name in job.model_fields_set & ScheduleJob.model_fields.keys() - {"task"}}
    return ScheduleJob.model_construct(**members)


@dataclass(frozen=True)
class Effort:
    """How an answer came about: method and reason, threads, and the seconds that solvers and model building took."""

    method: str | None
    why: str
    threads: int
    solver_seconds: float = 0.0
    build_seconds: float = 0.0


def provenance(job: Job, effort: Effort) -> Provenance:
    """Say from which request, by which versions and with what effort an answer was made."""
    return Provenance(
        request_sha256=fingerprint(job),
        versions=dict(_versions()),
        seed=job.seed,
        threads=effort.threads,
        why_method=effort.why,
        solver_seconds=round(effort.solver_seconds, 6),
        build_seconds=round(effort.build_seconds, 6),
    )


def fingerprint(job: Job) -> str:
    """Give the SHA-256 of a request's canonical form."""
    return hashlib.sha256(canonical(job)).hexdigest()


@cache
def _versions() -> tuple[tuple[str, str], ...]:
    return tuple((name, version(name)) for name in LIBRARIES)


def schedule(job: PlannedJob, replayed: Replay, outcome: Outcome, bound: float | None, effort: Effort) -> Schedule:
    """Dress a replay as a schedule; `bound` is the proven upper bound of its margin, None where nothing is proven."""
    if job.window is None:
        raise ValueError("the job must carry its window inline")
    gap = None if bound is None else relative_gap(replayed, bound)
    return Schedule(
        outcome=outcome,
        method=effort.method,
        currency=job.window.currency,
        price_basis=job.window.price_basis,
        margin=replayed.margin,
        margin_bound=bound,
        relative_gap=gap,
        start=replayed.interval_starts[0],
        interval=job.window.interval,
        timezone=job.window.timezone,
        interval_starts=replayed.interval_starts,
        totals=replayed.totals,
        assets=replayed.assets,
        sites=replayed.sites,
        fleet=replayed.fleet,
        commitments=replayed.commitments,
        assumptions=assumptions(job),
        verification=replayed.verification,
        provenance=provenance(job, effort),
        cautions=list(CAUTIONS),
    )


def relative_gap(replayed: Replay, bound: float) -> float:
    """Measure a gap as the contract does: against the margin, 1 % of the turnover, or one unit of the currency."""
    turnover = abs(replayed.totals.sales) + abs(replayed.totals.purchases)
    return max(0.0, bound - replayed.margin) / max(abs(replayed.margin), 0.01 * turnover, 1.0)


def undecided(job: PlannedJob, summary: str, bound: float | None, attempt: Schedule | None) -> Undecided:
    """Say that time ran out with neither a schedule nor a proof; the attempt does not meet the request."""
    return Undecided(
        summary=summary,
        margin_bound=bound,
        best_attempt=attempt,
        assumptions=assumptions(job),
        cautions=list(CAUTIONS),
    )
