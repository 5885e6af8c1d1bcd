"""Check how long a generator stays on and off, and price its starts.

A run lasts at least `min_up_hours` unless the window ends, or an outage leaves less than the minimum output (a trip).
Between two runs lie at least `min_down_hours`, after a trip too. The state before the window goes on counting.

    start cost = cost of the last entry with after_hours_off <= hours off before the start
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import fsum

from workers.planning.audit.generator_case import GeneratorCase
from workers.planning.audit.ledger import figure

_SAME_HOURS = 1e-9
"""Hours written as decimal fractions; far below the shortest interval."""


@dataclass(frozen=True)
class OnRun:
    """Intervals `first` up to, not including, `end` in which a generator is on."""

    first: int
    end: int


def runs_on(on: Sequence[bool]) -> list[OnRun]:
    """List the runs of a generator in order of time."""
    found = []
    first = None
    for t, is_on in enumerate(on):
        if is_on and first is None:
            first = t
        elif not is_on and first is not None:
            found.append(OnRun(first, t))
            first = None
    if first is not None:
        found.append(OnRun(first, len(on)))
    return found


def check_up_and_down_times(one: GeneratorCase, runs: Sequence[OnRun]) -> None:
    """Check minimum up and down times, as far as there are any."""
    shortest_up = one.case.clock.intervals_needed(one.generator.min_up_hours)
    shortest_down = one.case.clock.intervals_needed(one.generator.min_down_hours)
    if shortest_up > 0:
        _check_up_times(one, runs, shortest_up)
    if shortest_down > 0:
        for run, intervals in _intervals_off_before(one, runs):
            _check_down_time(one, run, intervals, shortest_down)


def _check_up_times(one: GeneratorCase, runs: Sequence[OnRun], shortest: int) -> None:
    begun = list(runs)
    if one.start.was_on:
        goes_on = bool(runs) and runs[0].first == 0
        under_way = begun.pop(0) if goes_on else OnRun(0, 0)
        _check_up_time(one, under_way, one.intervals_in_state() + under_way.end, shortest)
    for run in begun:
        _check_up_time(one, run, run.end - run.first, shortest)


def _check_up_time(one: GeneratorCase, run: OnRun, lasted: float, shortest: int) -> None:
    one.case.ledger.checks += 1
    if lasted >= shortest or run.end == one.case.clock.count or not one.can_run(run.end):
        return
    hours = one.case.clock.hours_of
    ended = f"{one.generator.id} stops at {one.since(run.end)} after {figure(hours(int(lasted)))} h"
    text = f"{ended}: it stays on for at least {figure(hours(shortest))} h"
    one.report("min_up", "min_up_hours", hours(shortest - int(lasted)), "h", text, interval=run.first)


def _intervals_off_before(one: GeneratorCase, runs: Sequence[OnRun]) -> list[tuple[OnRun, float]]:
    """List the starts, each with the intervals off before it; the state before the window in whole intervals."""
    before = 0.0 if one.start.was_on else one.intervals_in_state()
    return [(run, run.first - since if since else run.first + before) for run, since in _starts(one, runs)]


def _starts(one: GeneratorCase, runs: Sequence[OnRun]) -> list[tuple[OnRun, int]]:
    """List the runs that begin in the window, each with where it was last on: 0, the window's start, or later."""
    ends = [0, *(run.end for run in runs)]
    pairs = list(zip(runs, ends, strict=False))
    return pairs[1:] if one.start.was_on and runs and runs[0].first == 0 else pairs


def _check_down_time(one: GeneratorCase, run: OnRun, intervals: float, shortest: int) -> None:
    one.case.ledger.checks += 1
    if intervals >= shortest:
        return
    hours = one.case.clock.hours_of
    begins = f"{one.generator.id} starts at {one.since(run.first)} after {figure(hours(int(intervals)))} h off"
    text = f"{begins}: it stays off for at least {figure(hours(shortest))} h"
    one.report("min_down", "min_down_hours", hours(shortest - int(intervals)), "h", text, interval=run.first)


def start_cost(one: GeneratorCase, runs: Sequence[OnRun]) -> float:
    """Return what all starts cost, each by the hours off before it."""
    entries = one.generator.start_costs
    if not entries:
        return 0.0
    before = 0.0 if one.start.was_on else one.start.hours_in_state
    costs = []
    for run, since in _starts(one, runs):
        off = one.case.clock.hours_of(run.first - since) + (before if since == 0 else 0.0)
        reached = [entry.cost for entry in entries if entry.after_hours_off <= off + _SAME_HOURS]
        costs.append(reached[-1] if reached else 0.0)
    return fsum(costs)
