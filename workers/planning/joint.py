"""One model for plants that something couples: assemble the rules, solve, and never mix modes.

A store that may charge and discharge at once is a relaxation of a store: the binaries of `rules.exclusive_modes` go in
only where mixing could pay, or where an answer mixed. Such an answer is made a schedule by a linear polish with every
discrete choice and the modes fixed, often within the gap. The quadratic part of a generator's cost is treated alike:
tangents below it, the exact cost of what is found, more tangents there. Among several plants a narrower model near the
LP relaxation finds a first schedule, and proves nothing. A relaxation's bound is true, and an infeasible one proves the
request infeasible.
"""

from dataclasses import dataclass, field, replace
from time import perf_counter

import numpy as np

from workers.planning.assembly import (
    Assembled,
    Tangents,
    UnitPlan,
    assemble,
    mixed_modes,
    plans_of,
    tangents_at,
    tangents_needed,
    unmixed,
    where_mixing_may_pay,
    with_tangents,
)
from workers.planning.instance import Instance
from workers.planning.limits import AUDIT_SHARE, Limits, Unwatched, Watch
from workers.planning.rules import fuel_cost
from workers.planning.solvers import cp_sat, highs
from workers.planning.solvers.ending import Ending, Stopped
from workers.planning.units import Booleans

INFINITE = float("inf")
ROUNDS_BEFORE_WHOLE_STORES = 2
MOST_ROUNDS = 12
MOST_TANGENT_ROUNDS = 12
EXACT_ENOUGH = 1e-11
"""Share of the margin by which the model's fuel cost may miss the true one: outputs are flat in it, to some kW."""

GAP_SHARE_NEAR = 0.5
"""A model near the LP relaxation is solved to this share of the gap: what it loses to the bound comes on top."""

MONEY_UNIT = 1.0
"""Gaps are measured against at least one unit of the currency (contract, section 6)."""


@dataclass(frozen=True)
class Solution:
    """What was found for some units: their plans (None: nothing feasible in hand), margin, a proven upper bound."""

    stopped: Stopped
    plans: tuple[UnitPlan, ...] | None
    margin: float | None
    bound: float
    build_seconds: float
    solver_seconds: float
    fell_back: bool = False


@dataclass
class _Search:
    """The state of a solve: where modes are kept apart, what is in hand, what is proven, what it took."""

    instance: Instance
    apart: list[Booleans]
    seed: int
    limits: Limits
    watch: Watch
    ends: float
    by: str = "highs"
    tangents: list[Tangents] = field(default_factory=list)
    margin: float | None = None
    plans: tuple[UnitPlan, ...] | None = None
    bound: float = INFINITE
    rounds: int = 0
    build_seconds: float = 0.0
    solver_seconds: float = 0.0
    last: Stopped = Stopped.OUT_OF_TIME

    def assemble(self) -> Assembled:
        began = perf_counter()
        assembled = assemble(self.instance, self.apart, self.tangents)
        self.build_seconds += perf_counter() - began
        return assembled

    def solve(self, assembled: Assembled) -> Ending:
        """Solve, and take over what is proven."""
        if self.by == "cp_sat":
            ending = self._run_cp_sat(assembled)
        else:
            ending = self._run(assembled.matrix, self._left(), self.watch)
        self.last = ending.stopped
        self.bound = min(self.bound, ending.bound)
        return ending

    def solve_near(self, assembled: Assembled) -> Ending:
        """Solve a model that is narrower than the request's: it may find a schedule, it proves nothing."""
        return self._run(assembled.matrix, self._left(), self.watch, gap_share=GAP_SHARE_NEAR)

    def _run_cp_sat(self, assembled: Assembled) -> Ending:
        """Solve over whole steps; the bound is the tighter one of that and of the LP relaxation, both true."""
        relaxed = self._run(assembled.without_integers().matrix, self._left(), self.watch)
        if relaxed.stopped is Stopped.INFEASIBLE:
            return relaxed
        ending = cp_sat.solve(assembled.matrix, self._effort(self._left()), self.watch)
        self.solver_seconds += ending.seconds
        return replace(ending, bound=min(ending.bound, relaxed.bound))

    def choose_near(self, assembled: Assembled) -> Ending:
        """Let CP-SAT choose where its powers are likely to exist exactly; takes half the time at most."""
        ending = cp_sat.solve(assembled.matrix, self._effort(self._left() / 2), self.watch, near=True)
        self.solver_seconds += ending.seconds
        return ending

    def _left(self) -> float:
        return self.ends - self.limits.clock()

    def keep(
        self, assembled: Assembled, ending: Ending, mixed: list[Booleans], *, has_loose_modes: bool = False
    ) -> None:
        """Make a schedule of what a model found and keep the best; also after time or patience ran out.

        Discrete choices and modes stay; powers are settled by an LP, with tangents at the outputs it finds until the
        model's fuel cost is the true one. What mixes nothing and burns no square is a schedule as it is.
        """
        polished: Ending | None = ending
        is_mixed = has_loose_modes or any(where.any() for where in mixed)
        if is_mixed or self._missing_cost(assembled, ending) > 0:
            polished = self._polish(assembled, ending, mixed)
        if polished is None or polished.values is None or polished.margin is None:
            return
        margin = polished.margin - self._missing_cost(assembled, polished)
        if self.margin is None or margin > self.margin:
            self.margin, self.plans = margin, plans_of(assembled.columns, polished.values)
        # the relaxation's own outputs lie where its tangents cross, far from these: it takes many rounds to get here
        self.tangents += tangents_at(assembled.columns, polished.values)

    def _polish(self, assembled: Assembled, ending: Ending, mixed: list[Booleans]) -> Ending | None:
        """Give the best point of the LP that is left when everything discrete is fixed; None where there is none."""
        if ending.values is None:
            return None
        matrix, best = unmixed(assembled, ending.values, mixed), None
        for _ in range(MOST_TANGENT_ROUNDS):
            left = max(self._left(), self.limits.seconds * AUDIT_SHARE / 2)
            found = self._run(matrix, left, Unwatched())
            if found.values is None or found.margin is None:
                return best
            best = found
            rows = tangents_needed(assembled.columns, found.values, self.instance.hours)
            if self._missing_cost(assembled, found) <= EXACT_ENOUGH * max(1.0, abs(found.margin)) or not rows:
                return best
            matrix = with_tangents(assembled, matrix, rows)
        return best

    def _missing_cost(self, assembled: Assembled, ending: Ending) -> float:
        """Give by how much the model's fuel cost lies below the true one, money."""
        if ending.values is None:
            return 0.0
        columns, hours = assembled.columns, self.instance.hours
        return float(sum(fuel_cost.too_low(unit, ending.values, hours).sum() for unit in columns.generators))

    def _run(self, matrix: highs.Matrix, seconds: float, watch: Watch, *, gap_share: float = 1.0) -> Ending:
        ending = highs.solve(matrix, self._effort(seconds, gap_share), watch)
        self.solver_seconds += ending.seconds
        return ending

    def _effort(self, seconds: float, gap_share: float = 1.0) -> highs.Effort:
        instance = self.instance
        return highs.Effort(
            relative_gap=instance.relative_gap * gap_share,
            absolute_gap=max(instance.absolute_gap, instance.relative_gap * MONEY_UNIT),
            seconds=seconds,
            seed=self.seed,
        )

    def is_proven(self) -> bool:
        return self.margin is not None and is_within_gap(self.instance, self.margin, self.bound)

    def tighten(self, assembled: Assembled, ending: Ending, mixed: list[Booleans]) -> bool:
        """Keep modes apart where they were mixed, add tangents where fuel was too cheap; tell whether that is news."""
        before = sum(int(where.sum()) for where in self.apart) + len(self.tangents)
        for where, found in zip(self.apart, mixed, strict=True):
            where |= found if self.rounds <= ROUNDS_BEFORE_WHOLE_STORES else np.bool_(found.any())
        if ending.values is not None:
            self.tangents += tangents_needed(assembled.columns, ending.values, self.instance.hours)
        return sum(int(where.sum()) for where in self.apart) + len(self.tangents) > before

    def solution(self) -> Solution:
        stopped = Stopped.WITHIN_GAP if self.is_proven() else self.last
        return Solution(stopped, self.plans, self.margin, self.bound, self.build_seconds, self.solver_seconds)


def solve_jointly(
    instance: Instance, limits: Limits, watch: Watch, *, seed: int, seconds: float, everywhere: bool = False
) -> Solution:
    """Plan all units of an instance in one model; `everywhere` puts in every binary from the start."""
    apart = [where | np.bool_(everywhere) for where in where_mixing_may_pay(instance)]
    search = _Search(instance, apart, seed, limits, watch, limits.clock() + seconds)
    assembled = search.assemble()
    if len(instance.units) > 1 and assembled.matrix.integer.any():
        _first_schedule(search, assembled)
        if search.is_proven() or search.last is not Stopped.WITHIN_GAP:
            return search.solution()
    while True:
        search.rounds += 1
        ending = search.solve(assembled)
        if ending.values is None:
            return search.solution()
        mixed = mixed_modes(assembled.columns, ending.values)
        search.keep(assembled, ending, mixed)
        if search.is_proven() or ending.stopped is not Stopped.WITHIN_GAP or search.rounds == MOST_ROUNDS:
            return search.solution()
        if not search.tighten(assembled, ending, mixed):
            return search.solution()
        assembled = search.assemble()


def solve_by_cp_sat(instance: Instance, limits: Limits, watch: Watch, *, seed: int, seconds: float) -> Solution:
    """Plan all units of an instance by CP-SAT, with every binary from the start and the powers settled by an LP.

    Where no exact powers exist for what it chose over whole steps, or sizes are beyond whole steps, nothing is in hand.
    """
    apart = [np.ones(instance.intervals, dtype=bool) for _ in instance.stores]
    search = _Search(instance, apart, seed, limits, watch, limits.clock() + seconds, by="cp_sat")
    assembled = search.assemble()
    try:
        endings = (search.choose_near(assembled), search.solve(assembled))
    except cp_sat.BeyondWholeSteps:
        return search.solution()
    for ending in endings:
        if ending.values is not None and not search.is_proven():
            mixed = mixed_modes(assembled.columns, ending.values)
            search.keep(assembled, ending, mixed, has_loose_modes=True)
    return search.solution()


def _first_schedule(search: _Search, assembled: Assembled) -> None:
    """Find a schedule near the LP relaxation: what is whole there stays, the few choices left are a small model.

    The relaxation's bound is proven, and often enough; otherwise the schedule is what is in hand if time runs out.
    Where what stays leaves no schedule, the modes as fractions give one.
    """
    relaxed = search.solve(assembled.without_integers())
    if relaxed.values is None:
        return
    near = search.solve_near(assembled.with_whole_fixed(relaxed.values))
    if near.values is not None:
        search.keep(assembled, near, mixed_modes(assembled.columns, near.values), has_loose_modes=True)
    if search.plans is not None or not any(len(modes.columns) for modes in assembled.modes):
        return
    loose = assembled.with_modes_as_fractions()
    ending = search.solve(loose)
    if ending.values is not None:
        search.keep(loose, ending, mixed_modes(loose.columns, ending.values), has_loose_modes=True)


def is_within_gap(instance: Instance, margin: float, bound: float) -> bool:
    """Tell whether a bound proves a margin good enough; without a finite bound nothing is proven."""
    if not np.isfinite(bound):
        return False
    allowed = max(instance.absolute_gap, instance.relative_gap * max(abs(margin), MONEY_UNIT))
    return bound - margin <= allowed * (1 + 1e-6) + 1e-9
