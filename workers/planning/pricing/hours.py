"""What each further hour of a commitment costs: the margin at 0 hours less the margin at so many.

    margin(h) >= margin(h'),  bound(h') <= bound(h)      for h <= h'                    (1)

A schedule that serves more hours serves fewer, and what no schedule with fewer can exceed, none with more can. So a
schedule that delivers so many hours already is taken as it is, and figures never rise with the hours. Every margin is
one of a schedule that the audit passed, replayed on the request with so many hours.
"""

from dataclasses import dataclass, replace
from itertools import accumulate
from math import inf, isfinite

from schemas.commitments import HoursAtLeast
from schemas.job import ScheduleJob
from schemas.schedule import CommitmentCost
from workers.planning.audit import replay
from workers.planning.earlier import Earlier
from workers.planning.instance import Instance
from workers.planning.joint import Solution
from workers.planning.limits import AUDIT_SHARE, Limits, Watch
from workers.planning.methods import LONGEST_SHARE, Choice, Found, solve
from workers.planning.pricing.quiet import Quiet
from workers.planning.proof import Audited, audited, decisions_of
from workers.planning.rows import CommitmentRow, HoursRow
from workers.planning.screening import screen
from workers.planning.solvers.ending import Stopped

SAME_HOURS = 1e-9


@dataclass(frozen=True)
class HourCosts:
    """The entries in the order of their hours; `is_complete` unless time ran out before the most attainable."""

    entries: list[CommitmentCost]
    is_complete: bool


class _OutOfTime(Exception):  # noqa: N818 - an answer, not a fault
    """There is neither a schedule nor a proof that there is none."""


@dataclass
class _Pricing:
    """One commitment of a job under ever more hours; `known` are the schedules by their hours, in no order."""

    job: ScheduleJob
    number: int
    choice: Choice
    solutions: list[Solution]
    limits: Limits
    watch: Watch
    known: dict[float, Audited]

    @property
    def commitment(self) -> HoursAtLeast:
        promise = self.job.commitments[self.number]
        assert isinstance(promise, HoursAtLeast)
        return promise

    @property
    def rows(self) -> list[HoursRow]:
        return [
            row for part in self.choice.parts for row in part.rows if isinstance(row, HoursRow) and self._is_ours(row)
        ]

    @property
    def ceiling_hours(self) -> float:
        """Most hours that any row could be told of: all that count, and what was credited."""
        hours = self.choice.parts[0].hours
        credited = ((len(row.intervals) * hours, self.commitment.hours - row.due_hours) for row in self.rows)
        return min((most + credit for most, credit in credited), default=0.0)

    def serve(self, hours: float, waiting: int) -> bool:
        """Find a schedule with so many hours, unless there is proof of none; as many as `waiting` are to be served.

        Raises _OutOfTime where there is neither.
        """
        if any(abs(hours - done) <= SAME_HOURS for done in self.known):
            return True
        if self._is_over():
            raise _OutOfTime
        variant = self._asking(hours)
        if (served := self._served_already(variant)) is not None:
            self.known[hours] = served
            return True
        moved = {k: self._moved(part, hours) for k, part in enumerate(self.choice.parts) if self._is_touched(part)}
        if any(screen(part) for part in moved.values()):
            return False
        found = self._solved(moved, hours, waiting)
        if found.infeasible_parts:
            return False
        if not found.has_schedule:
            raise _OutOfTime
        self.known[hours] = audited(variant, found, self.limits, self.watch)
        return True

    def _solved(self, moved: dict[int, Instance], hours: float, waiting: int) -> Found:
        """Solve the parts with rows of ours, and put them among the others."""
        if not moved:
            return Found(self.choice, tuple(self.solutions))
        left = max(self.limits.left_to_solve(), 0.0)
        seconds = min(left, LONGEST_SHARE * left / max(waiting, 1))
        limits = replace(self.limits, seconds=seconds / (1 - AUDIT_SHARE), started=self.limits.clock())
        choice = Choice(self.choice.method, tuple(moved.values()), "")
        start = self._nearest(hours)
        again = solve(choice, limits, Quiet(self.watch), seed=self.job.seed, earlier=start)
        parts, solutions = list(self.choice.parts), list(self.solutions)
        for k, part, solution in zip(moved, again.choice.parts, again.solutions, strict=True):
            parts[k], solutions[k] = part, solution
        return Found(Choice(self.choice.method, tuple(parts), self.choice.why), tuple(solutions))

    def solve_others(self) -> bool:
        """Solve the parts without rows of ours that have no schedule yet; tell whether all of them can have one.

        Raises _OutOfTime where that stays open.
        """
        left_out = [
            k
            for k, part in enumerate(self.choice.parts)
            if self.solutions[k].plans is None and not self._is_touched(part)
        ]
        if left_out:
            choice = Choice(self.choice.method, tuple(self.choice.parts[k] for k in left_out), "")
            found = solve(choice, self.limits, Quiet(self.watch), seed=self.job.seed)
            if found.infeasible_parts:
                return False
            if not found.has_schedule:
                raise _OutOfTime
            for k, solution in zip(left_out, found.solutions, strict=True):
                self.solutions[k] = solution
        return True

    def _is_over(self) -> bool:
        return self.limits.left_to_solve() <= 0 or self.watch.is_stop_asked()

    def _is_touched(self, part: Instance) -> bool:
        return any(self._is_ours(row) for row in part.rows)

    def _is_ours(self, row: CommitmentRow) -> bool:
        return row.commitment == self.number and isinstance(row, HoursRow)

    def _moved(self, part: Instance, hours: float) -> Instance:
        """Give a part whose rows of the commitment ask for so many hours; what was credited stays."""
        more = hours - self.commitment.hours
        rows = [
            replace(row, due_hours=row.due_hours + more) if isinstance(row, HoursRow) and self._is_ours(row) else row
            for row in part.rows
        ]
        return replace(part, rows=tuple(rows))

    def _asking(self, hours: float) -> ScheduleJob:
        commitments = list(self.job.commitments)
        commitments[self.number] = self.commitment.model_copy(update={"hours": hours})
        return self.job.model_copy(update={"commitments": commitments})

    def _served_already(self, variant: ScheduleJob) -> Audited | None:
        """Take the schedule of the most hours so far where it delivers as many as the variant asks."""
        asked = variant.commitments[self.number]
        assert isinstance(asked, HoursAtLeast)
        fewer = [hours for hours in self.known if hours < asked.hours]
        if not fewer:
            return None
        last = self.known[max(fewer)]
        replayed = replay(variant, decisions_of(last.found))
        if replayed.verification.violations:
            return None
        if not all(row.met for row in replayed.commitments if row.id == asked.id):
            return None
        return Audited(last.found, replayed, last.bound)

    def _nearest(self, hours: float) -> Earlier | None:
        """Begin from the schedule that serves so many hours and least more, else from the one that serves the most."""
        if not self.known:
            return None
        more = [done for done in self.known if done > hours]
        near = self.known[min(more) if more else max(self.known)].found
        return {
            unit.id: plan
            for part, solution in zip(near.choice.parts, near.solutions, strict=True)
            for unit, plan in zip(part.units, solution.plans or (), strict=True)
        }


def commitment_costs(
    job: ScheduleJob,
    number: int,
    step_hours: float,
    choice: Choice,
    solved: Audited | Found | None,
    *,
    limits: Limits,
    watch: Watch,
) -> HourCosts:
    """Price the commitment of that number at 0 hours and in steps up to the most attainable, which comes last.

    The most attainable is that of a binding commitment; a priced one goes on to all the time that counts. `solved` is
    what is known of the job as asked; parts without rows of the commitment are solved only where it has nothing. No
    entries where 0 hours cannot be served.
    """
    promise = job.commitments[number]
    assert isinstance(promise, HoursAtLeast)
    known = {promise.hours: solved} if isinstance(solved, Audited) else {}
    found = solved.found if isinstance(solved, Audited) else solved
    nothing = Solution(Stopped.OUT_OF_TIME, None, None, inf, 0.0, 0.0)
    solutions = [nothing for _ in choice.parts] if found is None else list(found.solutions)
    pricing = _Pricing(job, number, choice, solutions, limits, watch, known)
    attained = None
    try:
        if not pricing.solve_others():
            return HourCosts([], is_complete=True)
        attained = _climb(pricing, step_hours)
        is_complete = True
    except _OutOfTime:
        is_complete = False
    return HourCosts(_entries(pricing.known, step_hours, attained), is_complete)


def _climb(pricing: _Pricing, step_hours: float) -> float | None:
    """Serve 0 hours and step by step more, then look between the last step that can be served and the next.

    Gives the most attainable hours, None where not even 0 can be served.
    """
    interval_hours, ceiling = pricing.choice.parts[0].hours, pricing.ceiling_hours
    steps = int(ceiling / step_hours + SAME_HOURS) if pricing.rows else 0
    reached = None
    for step in range(steps + 1):
        if not pricing.serve(step * step_hours, steps + 1 - step):
            break
        reached = step
        pricing.watch.progress("pricing", (step + 1) / (steps + 1))
    if reached is None or not pricing.rows:
        return None if reached is None else 0.0
    served = round(reached * step_hours / interval_hours)
    beyond = min(round((reached + 1) * step_hours / interval_hours), int(ceiling / interval_hours + SAME_HOURS) + 1)
    while beyond - served > 1:
        middle = (served + beyond) // 2
        if pricing.serve(middle * interval_hours, beyond - served):
            served = middle
        else:
            beyond = middle
    return served * interval_hours


def _entries(known: dict[float, Audited], step_hours: float, attained: float | None) -> list[CommitmentCost]:
    """List the steps that are known, and the most attainable; none without 0 hours, which costs are measured from."""
    steps = (hours for hours in known if _is_step(hours, step_hours) or hours == attained)
    listed = sorted(hours for hours in steps if attained is None or hours <= attained + SAME_HOURS)
    if not listed or listed[0] > SAME_HOURS:
        return []
    margins = [known[hours].replayed.margin for hours in listed]
    bounds = [inf if (bound := known[hours].bound) is None else bound for hours in listed]
    best = list(accumulate(reversed(margins), max))[::-1]
    proven = [max(bound, margin) for bound, margin in zip(accumulate(bounds, min), best, strict=True)]
    return [
        CommitmentCost(
            hours=hours, margin=margin, margin_bound=bound if isfinite(bound) else None, cost=best[0] - margin
        )
        for hours, margin, bound in zip(listed, best, proven, strict=True)
    ]


def _is_step(hours: float, step_hours: float) -> bool:
    return abs(hours - round(hours / step_hours) * step_hours) <= SAME_HOURS
