"""What the margin would gain if a single row of a commitment were dropped.

    margin without - bound with  <=  gain  <=  bound without - margin with             (1)

margin, bound  what a schedule of the part earns, and what none can exceed; with and without the row

The best schedules with and without the row lie between their margin and their bound, so their difference lies in (1),
and as dropping a row takes nothing away it is never below 0. Of a priced row the price goes too: what its shortfall
cost is part of the gain. The schedule in hand keeps the fewer rows, so there is always one without.
"""

from collections.abc import Callable, Iterable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from math import isfinite

from schemas.schedule import CommitmentResult, MarginForgone
from workers.planning.instance import Instance
from workers.planning.joint import Solution
from workers.planning.limits import AUDIT_SHARE, Limits, Watch
from workers.planning.methods import LONGEST_SHARE, Choice, Found, solve
from workers.planning.parts import independent_parts
from workers.planning.pricing.quiet import Quiet
from workers.planning.rows import CommitmentRow
from workers.planning.solvers.ending import Stopped

RowKey = tuple[str, str | None, str | None]
"""Commitment, asset and day: what tells a row in an answer."""

Forgone = dict[RowKey, MarginForgone]


@dataclass(frozen=True)
class _Question:
    """A part with its schedule, and the number of the row that it is asked to do without."""

    part: Instance
    solution: Solution
    number: int

    @property
    def row(self) -> CommitmentRow:
        return self.part.rows[self.number]

    @property
    def without(self) -> Instance:
        rows = self.part.rows
        return replace(self.part, rows=rows[: self.number] + rows[self.number + 1 :])


def margins_forgone(found: Found, limits: Limits, watch: Watch, *, seed: int) -> Forgone:
    """Price every row of what was found, side by side on the threads allowed; what time cuts off is left out."""
    questions = [
        _Question(part, solution, number)
        for part, solution in zip(found.choice.parts, found.solutions, strict=True)
        for number in range(len(part.rows))
    ]
    answered: list[tuple[RowKey, MarginForgone | None]] = []

    def ask(question: _Question) -> None:
        row = question.row
        gain = _gain(found.choice.method, question, _share(limits, len(questions) - len(answered)), watch, seed)
        answered.append(((row.id, row.asset, row.day), gain))
        watch.progress("pricing", len(answered) / len(questions))

    _side_by_side(ask, questions, limits.threads)
    return {key: gain for key, gain in answered if gain is not None}


def with_margins_forgone(results: Iterable[CommitmentResult], forgone: Forgone) -> list[CommitmentResult]:
    """Write the prices of rows beside them."""
    return [row.model_copy(update={"margin_forgone": forgone.get((row.id, row.asset, row.day))}) for row in results]


def _side_by_side(ask: Callable[[_Question], None], questions: list[_Question], threads: int) -> None:
    if threads == 1 or len(questions) <= 1:
        for question in questions:
            ask(question)
        return
    with ThreadPoolExecutor(threads, thread_name_prefix="row") as pool:
        for _ in pool.map(ask, questions):
            pass


def _share(limits: Limits, waiting: int) -> Limits:
    """Give one row the time it may take, on one thread, so that none starves the rest."""
    left = limits.left_to_solve()
    seconds = min(left, LONGEST_SHARE * left * limits.threads / max(waiting, 1))
    return replace(limits, seconds=seconds / (1 - AUDIT_SHARE), started=limits.clock(), threads=1)


def _gain(method: str, question: _Question, limits: Limits, watch: Watch, seed: int) -> MarginForgone | None:
    """Solve a part without a row, from its schedule; None where that leaves nothing proven."""
    before = question.solution
    if limits.left_to_solve() <= 0 or watch.is_stop_asked() or before.plans is None or before.margin is None:
        return None
    parts = tuple(independent_parts(question.without))
    earlier = {unit.id: plan for unit, plan in zip(question.part.units, before.plans, strict=True)}
    after = solve(Choice(method, parts, ""), limits, Quiet(watch), seed=seed, earlier=earlier)
    if not isfinite(after.bound) or any(one.stopped is Stopped.INFEASIBLE for one in after.solutions):
        return None
    reached = before.margin
    if after.has_schedule:
        reached = max(reached, sum(one.margin or 0.0 for one in after.solutions))
    least = max(0.0, reached - before.bound)
    return MarginForgone(at_least=least, at_most=max(least, after.bound - before.margin))
