"""What a task adds: a schedule to be replayed, a commitment to be priced, a day under way."""

from collections.abc import Iterator
from datetime import datetime

from schemas.checks.request import Request, fault, fits, wrong_length
from schemas.commitments import HoursAtLeast
from schemas.fleet import FixedLoad, Generator, Storage
from schemas.job import CheckJob, CommitmentCostsJob, RescheduleJob, ScheduleAsset
from schemas.problems import Fault

_NAMES_SHOWN = 3


def faults(request: Request) -> Iterator[Fault]:
    """Name what in the task's own members does not fit the fleet, the window or the commitments."""
    job = request.job
    if isinstance(job, CheckJob):
        yield from _check(request, job)
    elif isinstance(job, CommitmentCostsJob):
        yield from _commitment_costs(request, job)
    elif isinstance(job, RescheduleJob):
        yield from _reschedule(request, job)


def _check(request: Request, job: CheckJob) -> Iterator[Fault]:
    seen: set[str] = set()
    for position, entry in enumerate(job.schedule.assets):
        steps = ("schedule", "assets", position)
        if entry.id in seen:
            yield fault("duplicate", f"`{entry.id}` is named twice", *steps, "id")
        elif request.fleet is not None and entry.id not in request.assets:
            yield fault("unknown-reference", f"there is no asset `{entry.id}`", *steps, "id")
        seen.add(entry.id)
        yield from _decisions(request, entry, position)
    undecided = [
        name for name, asset in request.assets.items() if name not in seen and not isinstance(asset, FixedLoad)
    ]
    if undecided:
        names = ", ".join(f"`{name}`" for name in undecided[:_NAMES_SHOWN])
        more = f" and {len(undecided) - _NAMES_SHOWN} more" if len(undecided) > _NAMES_SHOWN else ""
        yield fault("missing", f"no decisions for {names}{more}", "schedule", "assets", len(job.schedule.assets))


def _decisions(request: Request, entry: ScheduleAsset, position: int) -> Iterator[Fault]:
    steps = ("schedule", "assets", position)
    asset = request.assets.get(entry.id)
    yield from wrong_length(request, entry.power_mw, *steps, "power_mw")
    if entry.on is not None:
        if asset is not None and not isinstance(asset, Generator):
            yield fault("wrong-kind", "only a generator is switched on", *steps, "on")
        yield from wrong_length(request, entry.on, *steps, "on")
    for product, held in (entry.reserve_mw or {}).items():
        if request.products is not None and product not in request.products:
            yield fault("unknown-reference", f"there is no reserve product `{product}`", *steps, "reserve_mw", product)
        yield from wrong_length(request, held, *steps, "reserve_mw", product)


def _commitment_costs(request: Request, job: CommitmentCostsJob) -> Iterator[Fault]:
    promise = request.promises.get(job.commitment)
    if promise is None:
        if "commitments" not in request.unread:
            yield fault("unknown-reference", f"there is no commitment `{job.commitment}`", "commitment")
    elif not isinstance(promise, HoursAtLeast):
        yield fault("wrong-kind", "only a commitment of kind `hours_at_least` is priced by the hour", "commitment")
    if request.windows and not fits(job.step_hours, request.windows[0][1].interval_hours):
        yield fault("off-border", f"{job.step_hours:.10g} h is not a whole number of intervals", "step_hours")


def _reschedule(request: Request, job: RescheduleJob) -> Iterator[Fault]:
    if job.locked_until is not None:
        yield from _instant_inside(request, job.locked_until, "locked_until")
    for name, actuals in job.actuals.items():
        steps = ("actuals", name)
        asset = request.assets.get(name)
        if request.fleet is not None and asset is None:
            yield fault("unknown-reference", f"there is no asset `{name}`", *steps)
        if actuals.stored_mwh is not None and asset is not None and not isinstance(asset, Storage):
            yield fault("wrong-kind", f"an asset of kind `{asset.kind}` stores nothing", *steps, "stored_mwh")
        if actuals.on is not None and asset is not None and not isinstance(asset, Generator):
            yield fault("wrong-kind", "only a generator is switched on", *steps, "on")
        misplaced = list(_instant_inside(request, actuals.until, *steps, "until"))
        yield from misplaced
        if request.calendar is None or misplaced:
            continue
        metered = len(request.calendar.starting_within(None, actuals.until))
        for member, series in (("power_mw", actuals.power_mw), ("on", actuals.on)):
            if series is not None and len(series) != metered:
                detail = f"has {len(series)} entries where {metered} intervals lie before `until`"
                yield fault("wrong-length", detail, *steps, member)


def _instant_inside(request: Request, instant: datetime, *steps: str) -> Iterator[Fault]:
    calendar = request.calendar
    if calendar is None:
        return
    if not calendar.start <= instant <= calendar.end:
        yield fault("out-of-range", "lies outside the window", *steps)
    elif not calendar.is_border(instant):
        yield fault("off-border", "not on an interval border", *steps)
