"""What of the prices was asked for, and how they stand in the answer."""

from dataclasses import dataclass, replace
from typing import TypeVar

from schemas.diagnosis import Diagnosis
from schemas.job import CommitmentCostsJob, ScheduleJob
from schemas.schedule import CommitmentCost, Schedule
from workers.planning import answer
from workers.planning.limits import Limits, Watch
from workers.planning.methods import Choice, Found
from workers.planning.pricing.forgone import Forgone, margins_forgone, with_margins_forgone
from workers.planning.pricing.hours import commitment_costs
from workers.planning.proof import Audited

SEARCH_SHARE = 0.5
"""Share of the time for the schedule as asked where each further hour is to be priced as well."""

PricedJob = ScheduleJob | CommitmentCostsJob
Priceable = TypeVar("Priceable", Schedule, Diagnosis)


@dataclass(frozen=True)
class Prices:
    """What was priced; None where it was not asked for. `cut_off` says in words what time did not suffice for."""

    forgone: Forgone | None = None
    costs: list[CommitmentCost] | None = None
    cut_off: tuple[str, ...] = ()


def limits_to_search(job: PricedJob, limits: Limits) -> Limits:
    """Leave time for pricing each further hour; rows of commitments are priced in what a search leaves over."""
    return replace(limits, seconds=limits.seconds * SEARCH_SHARE) if isinstance(job, CommitmentCostsJob) else limits


def prices_of(job: PricedJob, choice: Choice, solved: Audited | Found | None, limits: Limits, watch: Watch) -> Prices:
    """Price what the job asks to be priced, within what is left of its time.

    `solved` is a schedule as asked, or what was found on the way to the proof that there is none.
    """
    forgone, costs, cut_off = None, None, []
    if isinstance(job, CommitmentCostsJob):
        number = [promise.id for promise in job.commitments].index(job.commitment)
        asked = answer.as_schedule_job(job)
        priced = commitment_costs(asked, number, job.step_hours, choice, solved, limits=limits, watch=watch)
        costs = priced.entries
        if not priced.is_complete:
            told = f"more than {costs[-1].hours:g} h" if costs else "any hours"
            cut_off.append(f"what {told} of commitment {job.commitment} cost")
    if job.explain_commitments and isinstance(solved, Audited):
        forgone = margins_forgone(solved.found, limits, watch, seed=job.seed)
        left_out = sum(len(part.rows) for part in choice.parts) - len(forgone)
        if left_out:
            cut_off.append(f"the margin forgone for {left_out} of the rows of commitments")
    return Prices(forgone, costs, tuple(cut_off))


def with_prices(given: Priceable, prices: Prices) -> Priceable:
    """Write prices into an answer."""
    news: dict[str, object] = {"cut_off": [*given.cut_off, *prices.cut_off]}
    if prices.costs is not None:
        news["commitment_costs"] = prices.costs
    if prices.forgone is not None and isinstance(given, Schedule):
        news["commitments"] = with_margins_forgone(given.commitments, prices.forgone)
    return given.model_copy(update=news)
