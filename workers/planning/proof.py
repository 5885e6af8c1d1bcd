"""From what was found to what may be told: the audit judges the schedule, and its margin is held against the model's.

The solver is never trusted: neither that its schedule keeps the rules, nor that it earns what the model says, nor that
the bound lies above what it earns.
"""

from dataclasses import dataclass
from math import isfinite

from schemas.job import OneWindow
from schemas.schedule import Violation
from workers.planning.audit import Decision, Replay, replay
from workers.planning.extraction import decision_of
from workers.planning.limits import Limits, Watch
from workers.planning.methods import Found, solve

ROUND_OFF = 1e-6
"""Margins may differ by this share through round-off and the audit's tolerance; by more, a fault is ours."""


class PlanningError(Exception):
    """Our own fault: a schedule that the audit refuses, or a margin above its bound; carries the evidence."""

    def __init__(self, what: str, violations: list[Violation]) -> None:
        super().__init__(what, violations)
        self.what = what
        self.violations = violations


@dataclass(frozen=True)
class Audited:
    """A schedule that breaks no rule, and the proven upper bound of its margin; None where nothing is proven."""

    found: Found
    replayed: Replay
    bound: float | None


def audited(job: OneWindow, found: Found, limits: Limits, watch: Watch) -> Audited:
    """Let the audit judge; what it refuses is solved once more with every mode apart.

    Raises PlanningError where the audit refuses that too, or where margin, model and bound contradict each other.
    """
    replayed = replay(job, decisions_of(found))
    if replayed.verification.violations:
        again = solve(found.choice, limits, watch, seed=job.seed, careful=True)
        found = again if again.has_schedule else found
        replayed = replay(job, decisions_of(found))
    if replayed.verification.violations:
        raise PlanningError("the audit refuses every schedule found", replayed.verification.violations)
    _require_margin(replayed, found)
    return Audited(found, replayed, _bound_above(replayed, found.bound))


def decisions_of(found: Found) -> dict[str, Decision]:
    """Give what every unit was found to do, by its id; every part must have a schedule."""
    decisions = {}
    for part, solution in zip(found.choice.parts, found.solutions, strict=True):
        for unit, planned in zip(part.units, solution.plans or (), strict=True):
            decisions[unit.id] = decision_of(part, unit, planned)
    return decisions


def _slack(replayed: Replay) -> float:
    """Give how far round-off and the audit's tolerance may move a margin, in money."""
    turnover = abs(replayed.totals.sales) + abs(replayed.totals.purchases)
    return ROUND_OFF * max(1.0, abs(replayed.margin), turnover)


def _require_margin(replayed: Replay, found: Found) -> None:
    """Refuse a schedule that earns less than the model said: the model's money is wrong, and so is its bound.

    More than that is possible: within its gap a model may pay for a shortfall or a peak that is not there.
    """
    claimed = sum(solution.margin or 0.0 for solution in found.solutions)
    if replayed.margin < claimed - _slack(replayed):
        raise PlanningError(f"the schedule earns {replayed.margin}, the model said {claimed}", [])


def _bound_above(replayed: Replay, bound: float) -> float | None:
    """Give the bound, lifted over the margin where only round-off separates them."""
    if not isfinite(bound):
        return None
    if replayed.margin > bound + _slack(replayed):
        raise PlanningError(f"the margin {replayed.margin} lies above its bound {bound}", [])
    return max(bound, replayed.margin)
