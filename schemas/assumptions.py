"""What is taken as read where a request leaves something open: said in every answer, never silent."""

from collections.abc import Iterator
from datetime import date, datetime, time, timedelta
from itertools import chain
from zoneinfo import ZoneInfo

from schemas.calendar import Calendar
from schemas.commitments import Promise
from schemas.fleet import Generator, Storage
from schemas.job import Initial, Job, OneWindow, Outage
from schemas.problems import pointer
from schemas.schedule import Assumption
from schemas.window import Window

_NAMES_SHOWN = 3


def assumptions(job: Job) -> list[Assumption]:
    """List what is taken as read; a fleet or window given by id adds nothing until it is put in its place."""
    calendar = _calendar(job)
    parts = [_initial_energy(job), _generators_off(job), _final_targets(job), _products_elsewhere(job)]
    if calendar is not None:
        widened = (_widened(outage, position, calendar) for position, outage in enumerate(job.outages))
        parts.append(chain.from_iterable(widened))
        cut = set(calendar.cut_days())
        rows = (_rows(promise, position, calendar, cut) for position, promise in enumerate(job.commitments))
        parts.append(chain.from_iterable(rows))
    return list(chain.from_iterable(parts))


def _calendar(job: Job) -> Calendar | None:
    if isinstance(job, OneWindow):
        return Calendar.of(job.window) if job.window is not None else None
    inline = [window for window in job.windows if isinstance(window, Window)]
    if len(inline) != len(job.windows):
        return None
    first = Calendar.of(inline[0])
    return Calendar(first.start, first.interval, sum(window.intervals for window in inline), first.timezone)


def _initial_energy(job: Job) -> Iterator[Assumption]:
    for asset in job.fleet.assets if job.fleet is not None else ():
        if isinstance(asset, Storage):
            given = job.initial.get(asset.id)
            if given is not None:
                yield from _taken_to_capacity(asset, given)
            elif job.initial_from_job_id is None:
                yield from _without_initial(asset, job.missing_initial)


def _taken_to_capacity(store: Storage, given: Initial) -> Iterator[Assumption]:
    capacity = store.energy_capacity_mwh
    if given.stored_mwh is not None and given.stored_mwh > capacity:
        text = f"{given.stored_mwh:g} MWh is above the capacity of {capacity:g} MWh: taken as {capacity:g} MWh"
        yield _assumption(text, "initial", store.id, "stored_mwh")
    if given.state_of_charge_percent is not None and given.state_of_charge_percent > 100:
        text = (
            f"{given.state_of_charge_percent:g} % is above the capacity of {capacity:g} MWh: taken as {capacity:g} MWh"
        )
        yield _assumption(text, "initial", store.id, "state_of_charge_percent")


def _without_initial(store: Storage, choice: str) -> Iterator[Assumption]:
    highest = store.energy_capacity_mwh if store.max_stored_mwh is None else store.max_stored_mwh
    middle = (store.min_stored_mwh + highest) / 2
    if choice == "assume_middle":
        yield _assumption(f"no state given: {middle:g} MWh, the middle of its range, and idle", "initial", store.id)
    elif choice == "hold_out":
        text = f"no state given: held out for the whole window, tracked from {middle:g} MWh; its commitments stay due"
        yield _assumption(text, "initial", store.id)


def _generators_off(job: Job) -> Iterator[Assumption]:
    for asset in job.fleet.assets if job.fleet is not None else ():
        if isinstance(asset, Generator) and asset.id not in job.initial and job.initial_from_job_id is None:
            yield _assumption("no state given: off for longer than any limit asks", "initial", asset.id)


def _final_targets(job: Job) -> Iterator[Assumption]:
    open_ended = [
        asset.id
        for asset in (job.fleet.assets if job.fleet is not None else ())
        if isinstance(asset, Storage) and not _has_target(job, asset.id) and not _is_held_out(job, asset.id)
    ]
    if open_ended:
        text = "to end with the energy of the start, or what an idle store would have left if that is less"
        yield _assumption(f"no final energy given for {_named(open_ended)}: {text}", "targets")


def _has_target(job: Job, asset: str) -> bool:
    target = job.targets.get(asset)
    return target is not None and target.final_stored_mwh is not None


def _is_held_out(job: Job, asset: str) -> bool:
    return job.missing_initial == "hold_out" and asset not in job.initial and job.initial_from_job_id is None


def _products_elsewhere(job: Job) -> Iterator[Assumption]:
    """Say which products this window lacks; no fault, since one fleet serves many windows."""
    if job.fleet is None or not isinstance(job, OneWindow) or job.window is None:
        return
    known = {product.id for product in job.window.reserve_products}
    for position, asset in enumerate(job.fleet.assets):
        for place, product in enumerate(getattr(asset, "reserve_products", None) or ()):
            if product not in known:
                text = f"`{product}` is no product of this window: left out"
                yield _assumption(text, "fleet", "assets", position, "reserve_products", place)


def _widened(outage: Outage, position: int, calendar: Calendar) -> Iterator[Assumption]:
    zone = ZoneInfo(calendar.timezone)
    begin = calendar.start + (outage.from_ - calendar.start) // calendar.interval * calendar.interval
    if begin != outage.from_ and calendar.start <= begin < calendar.end:
        yield _assumption(_moved(outage.from_, begin, zone), "outages", position, "from")
    if outage.to is None:
        return
    end = calendar.start - (calendar.start - outage.to) // calendar.interval * calendar.interval
    if end != outage.to and calendar.start < end <= calendar.end:
        yield _assumption(_moved(outage.to, end, zone), "outages", position, "to")


def _moved(given: datetime, taken: datetime, zone: ZoneInfo) -> str:
    """Write both in local time; the date where it differs, the offset where the hour alone is ambiguous."""
    local, widened = given.astimezone(zone), taken.astimezone(zone)
    form = (
        "%H:%M" if local.date() == widened.date() and local.utcoffset() == widened.utcoffset() else "%Y-%m-%d %H:%M%z"
    )
    exact = form.replace("%M", "%M:%S") if local.second or local.microsecond else form
    return f"{local.strftime(exact)} widened to {widened.strftime(form)}"


def _rows(promise: Promise, position: int, calendar: Calendar, cut: set[date]) -> Iterator[Assumption]:
    """Say where the window cuts a day or a stretch, if any of its intervals count at all."""
    if not promise.each_day:
        return
    eligible = calendar.starting_within(promise.from_, promise.to)
    if promise.between is None:
        for day, members in calendar.day_ranges:
            if day in cut and _meet(members, eligible):
                text = f"the window holds a part of {day} only: the full figure is owed in it"
                yield _assumption(text, "commitments", position)
        return
    for day, began, ended in _stretches_at_the_edges(calendar, *promise.between):
        if not _meet(calendar.starting_within(began, ended), eligible):
            continue
        if began < calendar.start:
            text = f"the stretch that began {began:%Y-%m-%d %H:%M}, before the window, is no row"
            yield _assumption(text, "commitments", position, "between")
        elif ended > calendar.end:
            text = f"the window ends within the stretch of {day}: the full figure is owed in it"
            yield _assumption(text, "commitments", position, "between")


def _meet(left: range, right: range) -> bool:
    return max(left.start, right.start) < min(left.stop, right.stop)


def _stretches_at_the_edges(
    calendar: Calendar, opening: time, closing: time
) -> Iterator[tuple[date, datetime, datetime]]:
    """List, for the days around the window's start and end, when their stretch begins and ends."""
    zone = ZoneInfo(calendar.timezone)
    first, last = calendar.days[0], calendar.days[-1]
    for day in sorted({first - timedelta(days=1), first, last - timedelta(days=1), last}):
        closing_day = day if opening < closing else day + timedelta(days=1)
        yield day, datetime.combine(day, opening, zone), datetime.combine(closing_day, closing, zone)


def _named(names: list[str]) -> str:
    shown = ", ".join(f"`{name}`" for name in names[:_NAMES_SHOWN])
    return shown if len(names) <= _NAMES_SHOWN else f"{shown} and {len(names) - _NAMES_SHOWN} more"


def _assumption(text: str, *steps: str | int) -> Assumption:
    return Assumption(pointer=pointer(*steps), text=text)
