"""What the demo must show; anything else is a failure of it, said by name."""

from collections.abc import Iterator
from datetime import datetime
from itertools import pairwise
from math import fsum, isclose
from typing import Any

from schemas.commitments import HoursAtLeast
from schemas.diagnosis import Diagnosis, Repair
from schemas.job import ScheduleJob
from schemas.json_patch import PatchRefused, patched
from schemas.problems import InvalidRequest
from schemas.reading import read_job
from schemas.schedule import Schedule
from service.demo.commitments_text import threshold_mw
from service.demo.money_text import ledger, whole

SAME_MONEY = 1e-6
SAME_POWER_MW = 1e-6
SAME_MARGIN = 0.005
"""Half of the last digit that is printed: two solves of one request differ by round-off."""


def shortcomings(job: ScheduleJob, schedule: Schedule) -> Iterator[str]:
    """Say in what a schedule falls short of one that holds."""
    if schedule.outcome not in ("optimal", "feasible"):
        yield f"the outcome is {schedule.outcome}"
    if schedule.verification.checks == 0:
        yield "nothing was checked"
    yield from (f"violation: {violation.text}" for violation in schedule.verification.violations)
    if not schedule.cautions:
        yield "the schedule carries no cautions"
    yield from _unkept(job, schedule)
    yield from _unsettled(schedule)
    if schedule.margin_bound is None or schedule.margin_bound < schedule.margin:
        yield f"the bound {schedule.margin_bound} does not lie above the margin {schedule.margin}"


def _unkept(job: ScheduleJob, schedule: Schedule) -> Iterator[str]:
    """Look at each row, and count its hours again where one asset or one site is to keep it.

    Only intervals from `from` to `to` at or above the threshold can count: there are no fewer than are said to be kept.
    """
    asked = {promise.id: promise for promise in job.commitments if isinstance(promise, HoursAtLeast)}
    power_mw = {meter.id: meter.power_mw for meter in schedule.sites}
    power_mw |= {asset.id: asset.power_mw for asset in schedule.assets}
    step_hours = schedule.interval.total_seconds() / 3600
    for name in asked.keys() - {row.id for row in schedule.commitments}:
        yield f"commitment {name} is not answered"
    for row in schedule.commitments:
        promise, said = asked[row.id], row.delivered_hours or 0.0
        if promise.shortfall_price_per_hour is None and not row.met:
            yield f"commitment {row.id} binds and is not met"
        if row.met and said < promise.hours:
            yield f"commitment {row.id} is called met with {said:g} h of {promise.hours:g} h"
        who = row.asset or promise.applies_to.site
        if who is not None:
            least = threshold_mw(job, promise, row.asset) - SAME_POWER_MW
            counts = [_is_within(promise, start) for start in schedule.interval_starts]
            counted = step_hours * sum(is_in and mw >= least for is_in, mw in zip(counts, power_mw[who], strict=True))
            if counted < said:
                yield f"commitment {row.id}: {said:g} h are said to be kept, {counted:g} h can be counted"


def _is_within(promise: HoursAtLeast, start: datetime) -> bool:
    return (promise.from_ is None or start >= promise.from_) and (promise.to is None or start < promise.to)


def _unsettled(schedule: Schedule) -> Iterator[str]:
    """Add up the parts and compare with the totals, and the totals with the margin."""
    rows, totals = ledger(schedule), whole(schedule)
    for name, amount in totals.items():
        parts = fsum(row.get(name, 0.0) for row in rows.values())
        if not isclose(parts, amount, rel_tol=0.0, abs_tol=SAME_MONEY):
            yield f"{name}: the parts add up to {parts}, the total is {amount}"
    together = fsum(totals.values())
    if not isclose(together, schedule.margin, rel_tol=0.0, abs_tol=SAME_MONEY):
        yield f"the totals add up to {together}, the margin is {schedule.margin}"


def shortcomings_of_refusal(job: ScheduleJob, request: dict[str, Any], diagnosis: Diagnosis) -> Iterator[str]:
    """Say in what a diagnosis falls short of one a person can act on; `request` is what its patches refer to."""
    if not diagnosis.summary:
        yield "the diagnosis has no summary"
    if not diagnosis.cautions:
        yield "the diagnosis carries no cautions"
    if not diagnosis.complete:
        yield f"the diagnosis is not complete: {', '.join(diagnosis.cut_off) or 'more conflicts may exist'}"
    yield from _unexplained(job, diagnosis)
    yield from _unrepaired(request, diagnosis.repairs)
    nearest = diagnosis.nearest_schedule
    if nearest is None:
        yield f"there is no nearest schedule: {diagnosis.no_nearest_schedule}"
    elif not nearest.shortfalls:
        yield "the nearest schedule does not say what it misses"
    elif not nearest.cautions:
        yield "the nearest schedule carries no cautions"


def _unexplained(job: ScheduleJob, diagnosis: Diagnosis) -> Iterator[str]:
    """Look for a commitment among what cannot hold together, and for how far each one there can be met."""
    for conflict in diagnosis.conflicts:
        if not conflict.irreducible:
            yield f"more is named than needed: {', '.join(member.pointer for member in conflict.members)}"
    names = {f"/commitments/{place}": promise.id for place, promise in enumerate(job.commitments)}
    members = [member for conflict in diagnosis.conflicts for member in conflict.members]
    rows = {(names[member.pointer], member.asset, member.day) for member in members if member.pointer in names}
    if not rows:
        yield "the diagnosis names no commitment"
    for name, asset, day in rows - {(row.commitment, row.asset, row.day) for row in diagnosis.attainable}:
        yield f"how far {' '.join(filter(None, (name, asset, day)))} can be met is not said"


def _unrepaired(request: dict[str, Any], repairs: list[Repair]) -> Iterator[str]:
    """Try each patch on the request, and look at what is said of its margin."""
    if not repairs:
        yield "there is no way out"
    for repair in repairs:
        if not repair.verified:
            yield f"{repair.text}: not verified"
        if repair.margin > repair.margin_bound + SAME_MARGIN:
            yield f"{repair.text}: the margin {repair.margin} lies above its bound {repair.margin_bound}"
        try:
            read_job(patched(request, repair.patch))
        except (PatchRefused, InvalidRequest) as fault:
            yield f"{repair.text}: its patch gives no job: {fault}"
    for better, worse in pairwise(repairs):
        if worse.margin > better.margin:
            yield f"{worse.text}: stands behind what earns less"


def shortcomings_of_cure(job: ScheduleJob, schedule: Schedule, repair: Repair) -> Iterator[str]:
    """Say in what the cured day falls short of a good one, or of what the repair promised.

    Both solved the same request: neither margin can lie above the other's bound.
    """
    yield from (f"the cured day: {shortcoming}" for shortcoming in shortcomings(job, schedule))
    if schedule.margin > repair.margin_bound + SAME_MARGIN:
        yield f"the cured day earns {schedule.margin}, more than was proven possible: {repair.margin_bound}"
    if schedule.margin_bound is not None and repair.margin > schedule.margin_bound + SAME_MARGIN:
        yield f"the cured day can earn {schedule.margin_bound} at most, and {repair.margin} was promised"
