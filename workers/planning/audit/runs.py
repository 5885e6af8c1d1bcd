"""Check how long a store runs, how long it rests in between, and how often it starts in a day.

A run is a stretch of intervals with power in one direction. It lasts at least `min_run_hours` unless the window ends,
or an outage leaves too little to go on (a trip). Between two runs lie at least `min_rest_hours` of idle intervals,
after a trip too. What was under way at the window's start goes on counting; its beginning is no start.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from workers.planning.audit.initial import direction_of
from workers.planning.audit.ledger import IDLE_MW, figure
from workers.planning.audit.store_case import StoreCase

_SAME_POWER_MW = 1e-9
"""A limit scaled by an outage to exactly the minimum power leaves enough to run, whatever the rounding."""

_VERBS = {1: "discharging", -1: "charging"}


@dataclass(frozen=True)
class Run:
    """Intervals `first` up to, not including, `end` with power in one direction: 1 discharging, -1 charging."""

    direction: int
    first: int
    end: int


def runs_of(power: Sequence[float]) -> list[Run]:
    """List the runs of a store in order of time."""
    found = []
    direction, first = 0, 0
    for t, mw in enumerate(power):
        now = direction_of(mw)
        if now != direction:
            if direction:
                found.append(Run(direction, first, t))
            direction, first = now, t
    if direction:
        found.append(Run(direction, first, len(power)))
    return found


def check_runs(one: StoreCase) -> None:
    """Check run times, rest times and starts of one store, as far as it has any."""
    shortest_run = one.case.clock.intervals_needed(one.store.min_run_hours)
    shortest_rest = one.case.clock.intervals_needed(one.store.min_rest_hours)
    if shortest_run <= 0 and shortest_rest <= 0 and one.store.max_starts_per_day is None:
        return
    runs = runs_of(one.power_mw)
    direction = direction_of(one.start.power_mw)
    goes_on = bool(runs) and runs[0].first == 0 and runs[0].direction == direction
    under_way = Run(direction, 0, runs[0].end if goes_on else 0)
    begun = runs[1:] if goes_on else runs
    if shortest_run > 0:
        _check_run_times(one, under_way, begun, shortest_run)
    if shortest_rest > 0:
        _check_rest_times(one, under_way, begun, shortest_rest)
    if one.store.max_starts_per_day is not None:
        _check_starts(one, begun, one.store.max_starts_per_day)


def _check_run_times(one: StoreCase, under_way: Run, begun: list[Run], shortest: int) -> None:
    passed = one.start.intervals_in_state
    if under_way.direction and passed is not None:
        _check_run_time(one, under_way, passed + under_way.end, shortest)
    for run in begun:
        _check_run_time(one, run, run.end - run.first, shortest)


def _check_run_time(one: StoreCase, run: Run, lasted: int, shortest: int) -> None:
    one.case.ledger.checks += 1
    if lasted >= shortest or _may_end(one, run):
        return
    hours = one.case.clock.hours_of
    ended = f"{one.store.id} stops {_VERBS[run.direction]} at {one.since(run.end)} after {figure(hours(lasted))} h"
    text = f"{ended}: a run lasts at least {figure(hours(shortest))} h"
    one.report("min_run", "min_run_hours", hours(shortest - lasted), "h", text, interval=run.first)


def _may_end(one: StoreCase, run: Run) -> bool:
    """Tell whether a run may end where it does however short it is: at the window's end, or by a trip."""
    if run.end == one.case.clock.count:
        return True
    limit, least = one.store.discharge_limit_mw, one.store.min_discharge_mw
    if run.direction < 0:
        limit, least = one.store.charge_limit_mw, one.store.min_charge_mw
    if one.available is not None:
        left = one.available.discharge if run.direction > 0 else one.available.charge
        limit *= left.fraction[run.end]
    return limit <= IDLE_MW or limit < least - _SAME_POWER_MW


def _check_rest_times(one: StoreCase, under_way: Run, begun: list[Run], shortest: int) -> None:
    # The interval in which the rest began; one before the window has a number below 0.
    resting_since = under_way.end
    if under_way.direction == 0:
        passed = one.start.intervals_in_state
        resting_since = -(shortest if passed is None else passed)
    hours = one.case.clock.hours_of
    for run in begun:
        one.case.ledger.checks += 1
        rested = run.first - resting_since
        if rested < shortest:
            begins = f"{one.store.id} starts {_VERBS[run.direction]} at {one.since(run.first)}"
            text = f"{begins} after {figure(hours(rested))} h of rest: it rests at least {figure(hours(shortest))} h"
            one.report("min_rest", "min_rest_hours", hours(shortest - rested), "h", text, interval=run.first)
        resting_since = run.end


def _check_starts(one: StoreCase, begun: list[Run], most: int) -> None:
    before = one.case.job.counted_before.assets.get(one.store.id)
    starts = one.case.clock.starts
    for day, members in one.case.clock.days.items():
        one.case.ledger.checks += 1
        count = sum(starts[run.first].date() == day for run in begun)
        had = before.starts if before is not None and day == one.case.clock.first_day else 0
        # A day that had more than it may has none left; what it had is a fact, and no fault of the schedule.
        if count > max(0, most - had):
            text = f"{one.store.id} starts {had + count} times on {day}, {most} are allowed"
            member = "max_starts_per_day"
            one.report(member, member, float(count - max(0, most - had)), "starts", text, interval=members[0])
