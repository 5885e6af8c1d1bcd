"""What is proven of a schedule and how it came about, in words."""

from collections.abc import Iterable, Iterator

from schemas.job import ScheduleJob
from schemas.schedule import Assumption, Schedule


def proof_text(job: ScheduleJob, schedule: Schedule) -> Iterator[str]:
    """Write margin, bound and gap, the method and why, and what the audit looked at."""
    currency, basis = schedule.currency, schedule.price_basis
    if schedule.outcome != "optimal":
        yield f"Time ran out before the gap asked for was proven: {schedule.outcome}, but maybe not the best."
    yield f"Margin of the day, at {basis} prices: {schedule.margin:.2f} {currency}. {_bound(job, schedule)}"
    source = schedule.provenance
    yield (
        f"Planned by method {schedule.method} ({source.why_method}), in {source.solver_seconds:.2f} s of solving and "
        f"{source.build_seconds:.2f} s of building models, on up to {source.threads} thread(s)."
    )
    found = schedule.verification
    yield (
        f"Replayed from the request and the set points by code that shares nothing with the solver: {found.checks} "
        f"checks, {len(found.violations)} violations; the largest residual let pass is {found.largest_residual:.1e} "
        "(MW, MWh or h), where 1e-6 of a limit, and never less than 1e-6, is tolerated."
    )


def _bound(job: ScheduleJob, schedule: Schedule) -> str:
    if schedule.margin_bound is None or schedule.relative_gap is None:
        return "Nothing is proven of how much more could be earned."
    more = schedule.margin_bound - schedule.margin
    return (
        f"Proven: no schedule of this request earns more than {schedule.margin_bound:.2f} {schedule.currency}, "
        f"so at most {more:.2f} {schedule.currency} ({schedule.relative_gap:.3%}) is missed "
        f"(asked for: at most {job.relative_gap:.3%})."
    )


def assumptions_text(assumptions: Iterable[Assumption]) -> Iterator[str]:
    """Write what was taken as read where the request left something open."""
    yield from (f"- {assumption.pointer}: {assumption.text}" for assumption in assumptions)
