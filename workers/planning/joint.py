"""One model for plants that something couples: assemble the rules, solve, and never mix modes.

A store that may charge and discharge at once is a relaxation of a store: the binaries of `rules.exclusive_modes` go in
only where mixing could pay, or where an answer mixed. Such an answer is made a schedule by a linear polish with every
discrete choice and the modes fixed, often within the gap. The quadratic part of a generator's cost is treated alike:
tangents below it, the exact cost of what is found, more tangents there. Among several plants a narrower model near the
LP relaxation finds a first schedule, and proves nothing. A relaxation's bound is true, and an infeasible one proves the
request infeasible.

An earlier schedule of the same plants is tried first: what it decided stays, its powers are settled anew, and where
the relaxation proves that good enough, nothing else is solved. Otherwise it is in hand from then on.
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
    with_closed,
    with_tangents,
)
from workers.planning.earlier import as_it_was, is_of_shape, with_its_choices
from workers.planning.instance import Instance
from workers.planning.limits import AUDIT_SHARE, Limits, Unwatched, Watch
from workers.planning.rules import fuel_cost
from workers.planning.solvers import cp_sat, highs
from workers.planning.solvers.ending import Ending, Stopped
from workers.planning.units import Booleans, Floats

INFINITE = float("inf")
ROUNDS_BEFORE_WHOLE_STORES = 2
MOST_ROUNDS = 12
MOST_TANGENT_ROUNDS = 12
EXACT_ENOUGH = 1e-11
"""Share of the margin by which the model's fuel cost may miss the true one: outputs are flat in it, to some kW."""

GAP_SHARE_NEAR = 0.5
"""A model near the LP relaxation is solved to this share of the gap: what it loses to the bound comes on top."""

ROUND_OFF = 1e-8
"""Share of the margin that a proof leaves of the gap: the audit's margin is not the model's to the last digit."""

LITTLE_LEFT_GAP = 1e-9
"""Where powers are given, little is left to choose, and nothing of it should be given away."""

EARLIER_SHARE = 0.1
"""Share of the time for the choices of an earlier schedule whose powers are not possible any more."""

MOMENT = 0.1
CP_SAT_SHARE = 0.25
"""Seconds for HiGHS before CP-SAT is asked whether anything is possible, and the share of the time it may take then."""

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
    by_pyomo: bool = True
    any_will_do: bool = False
    tangents: list[Tangents] = field(default_factory=list)
    margin: float | None = None
    plans: tuple[UnitPlan, ...] | None = None
    values: Floats | None = None
    bound: float = INFINITE
    has_start: bool = False
    rounds: int = 0
    build_seconds: float = 0.0
    solver_seconds: float = 0.0
    relaxed: Ending | None = None
    last: Stopped = Stopped.OUT_OF_TIME

    def assemble(self) -> Assembled:
        began = perf_counter()
        assembled = assemble(
            self.instance,
            self.apart,
            self.tangents,
            by_pyomo=self.by_pyomo,
            is_tightened=self.by != "cp_sat",
        )
        self.build_seconds += perf_counter() - began
        return assembled

    def solve(self, assembled: Assembled) -> Ending:
        """Solve, and take over what is proven."""
        if self.by == "cp_sat":
            ending = self._run_cp_sat(assembled)
        elif self.any_will_do and len(self.instance.units) == 1 and assembled.matrix.integer.any():
            ending = self._run_in_turns(assembled.matrix)
        else:
            ending = self._run(assembled.matrix, self._left(), self.watch)
        self.last = ending.stopped
        self.bound = min(self.bound, ending.bound)
        return ending

    def solve_above(self, assembled: Assembled) -> Ending:
        """Solve for what is better than the schedule in hand by more than the gap; nothing there proves the schedule.

        That prunes as a start would, which HiGHS is not given (`solvers.highs.solve`).
        """
        assert self.margin is not None
        allowed = allowed_gap(self.instance, self.margin)
        enough = self.margin + max(allowed - ROUND_OFF * max(abs(self.margin), MONEY_UNIT), allowed / 2)
        ending = self._run(assembled.with_margin_at_least(enough).matrix, self._left(), self.watch)
        self.last = Stopped.WITHIN_GAP if ending.stopped is Stopped.INFEASIBLE else ending.stopped
        self.bound = min(self.bound, max(ending.bound, enough))
        return ending

    def solve_near(self, assembled: Assembled) -> Ending:
        """Solve a model that is narrower than the request's: it may find a schedule, it proves nothing."""
        return self._run(assembled.matrix, self._left(), self.watch, gap_share=GAP_SHARE_NEAR)

    def solve_choices(self, assembled: Assembled) -> Ending:
        """Solve a model with the choices of an earlier schedule: like a near one, in a share of the time."""
        seconds = max(EARLIER_SHARE * self._left(), self.limits.seconds * AUDIT_SHARE / 2)
        return self._run(assembled.matrix, seconds, self.watch, gap_share=GAP_SHARE_NEAR)

    def solve_little(self, assembled: Assembled) -> Ending:
        """Solve a model that leaves little open, to its optimum; there is time for it even when time has run out."""
        seconds = self._left_to_hand_over()
        effort = replace(self._effort(seconds), relative_gap=LITTLE_LEFT_GAP, absolute_gap=LITTLE_LEFT_GAP)
        ending = highs.solve(assembled.matrix, effort, self.watch)
        self.solver_seconds += ending.seconds
        return ending

    def _run_cp_sat(self, assembled: Assembled) -> Ending:
        """Solve over whole steps; the bound is the tighter one of that and of the LP relaxation, both true."""
        if self.relax(assembled).stopped is Stopped.INFEASIBLE:
            return Ending(Stopped.INFEASIBLE, None, None, -INFINITE, 0.0)
        ending = cp_sat.solve(assembled.matrix, self._effort(self._left()), self.watch, hint=self.values)
        self.solver_seconds += ending.seconds
        return ending

    def _run_in_turns(self, matrix: highs.Matrix) -> Ending:
        """Find any point, or prove that there is none: HiGHS for a moment, then CP-SAT, then HiGHS again.

        CP-SAT is through with states, runs and blocks several times sooner; what it chose counts where exact powers
        exist for it. Its own proof is of a model that relaxes this one.
        """
        ending = self._run(matrix, min(MOMENT, self._left()), self.watch)
        if ending.stopped is not Stopped.OUT_OF_TIME or ending.values is not None:
            return ending
        for near in (True, False):
            try:
                chosen = cp_sat.solve(matrix, self._effort(CP_SAT_SHARE * self._left()), self.watch, near=near)
            except cp_sat.BeyondWholeSteps:
                break
            self.solver_seconds += chosen.seconds
            if chosen.stopped is Stopped.INFEASIBLE and not near:
                return chosen
            if chosen.values is not None:
                exact = self._run(highs.fixed(matrix, chosen.values), self._left(), self.watch)
                if exact.values is not None:
                    return replace(exact, bound=INFINITE)
        return self._run(matrix, self._left(), self.watch)

    def relax(self, assembled: Assembled) -> Ending:
        """Solve the LP relaxation and take over its bound."""
        if self.relaxed is None:
            self.relaxed = self._run(assembled.without_integers().matrix, self._left(), self.watch)
            self.bound = min(self.bound, self.relaxed.bound)
        return self.relaxed

    def choose_near(self, assembled: Assembled) -> Ending:
        """Let CP-SAT choose where its powers are likely to exist exactly; takes half the time at most."""
        ending = cp_sat.solve(assembled.matrix, self._effort(self._left() / 2), self.watch, near=True, hint=self.values)
        self.solver_seconds += ending.seconds
        return ending

    def _left(self) -> float:
        return self.ends - self.limits.clock()

    def _left_to_hand_over(self) -> float:
        return max(self._left(), self.limits.seconds * AUDIT_SHARE / 2)

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
        if polished is not None:
            self._take(assembled, polished)

    def keep_earlier(self, assembled: Assembled, ending: Ending) -> None:
        """Keep the best powers for the choices of an earlier schedule, and that schedule where none are better.

        Directions stay open where the model has no binary for them.
        """
        mixed = mixed_modes(assembled.columns, ending.values) if ending.values is not None else []
        if not any(where.any() for where in mixed):
            self._take(assembled, ending)
        polished = self._polish(assembled, ending, mixed)
        if polished is not None:
            self._take(assembled, polished)

    def _take(self, assembled: Assembled, polished: Ending) -> None:
        if polished.values is None or polished.margin is None:
            return
        margin = polished.margin - self._missing_cost(assembled, polished)
        if self.margin is None or margin > self.margin:
            self.margin, self.plans = margin, plans_of(assembled.columns, polished.values)
            self.values = polished.values
        # the relaxation's own outputs lie where its tangents cross, far from these: it takes many rounds to get here
        self.tangents += tangents_at(assembled.columns, polished.values)

    def _polish(self, assembled: Assembled, ending: Ending, mixed: list[Booleans]) -> Ending | None:
        """Give the best point of the LP that is left when everything discrete is fixed; None where there is none.

        Where it mixes modes anew, one direction is closed there too: what is given mixes none.
        """
        if ending.values is None:
            return None
        matrix, best = unmixed(assembled, ending.values, mixed), None
        for _ in range(MOST_TANGENT_ROUNDS):
            found = self._run(matrix, self._left_to_hand_over(), Unwatched())
            if found.values is None or found.margin is None:
                return best
            again = mixed_modes(assembled.columns, found.values)
            if any(where.any() for where in again):
                matrix = with_closed(assembled, matrix, found.values, again)
                continue
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
    instance: Instance,
    limits: Limits,
    watch: Watch,
    *,
    seed: int,
    seconds: float,
    everywhere: bool = False,
    earlier: tuple[UnitPlan, ...] | None = None,
    by_pyomo: bool = True,
    any_will_do: bool = False,
) -> Solution:
    """Plan all units of an instance in one model; `everywhere` puts in every binary from the start.

    `earlier` is what the units did in an earlier schedule; one that does not fit the instance is passed over. With
    `any_will_do` the question is only whether anything is possible: the instance's gap is as wide as any.
    """
    apart = [where | np.bool_(everywhere) for where in where_mixing_may_pay(instance)]
    search = _Search(
        instance, apart, seed, limits, watch, limits.clock() + seconds, by_pyomo=by_pyomo, any_will_do=any_will_do
    )
    _search_jointly(search, earlier)
    if search.plans is None and search.last is not Stopped.INFEASIBLE:
        _start_from(search, search.assemble(), earlier)
    return search.solution()


def _search_jointly(search: _Search, earlier: tuple[UnitPlan, ...] | None) -> None:
    """Search until the best in hand is proven good enough, or time or patience ends."""
    assembled, several = search.assemble(), len(search.instance.units) > 1
    is_near_tried = several or search.any_will_do
    if assembled.matrix.integer.any() and (is_near_tried or earlier is not None):
        relaxed = search.solve(assembled.without_integers())
        if relaxed.values is None:
            return
        _start_from(search, assembled, earlier)
        if is_near_tried and not search.is_proven():
            _first_schedule(search, assembled, relaxed.values)
        if search.is_proven() or search.last is not Stopped.WITHIN_GAP:
            return
    while True:
        search.rounds += 1
        ending = search.solve_above(assembled) if search.has_start and several else search.solve(assembled)
        if ending.values is None:
            return
        mixed = mixed_modes(assembled.columns, ending.values)
        search.keep(assembled, ending, mixed)
        if search.is_proven() or ending.stopped is not Stopped.WITHIN_GAP or search.rounds == MOST_ROUNDS:
            return
        if not search.tighten(assembled, ending, mixed):
            return
        assembled = search.assemble()


def solve_by_cp_sat(
    instance: Instance,
    limits: Limits,
    watch: Watch,
    *,
    seed: int,
    seconds: float,
    earlier: tuple[UnitPlan, ...] | None = None,
) -> Solution:
    """Plan all units of an instance by CP-SAT, with every binary from the start and the powers settled by an LP.

    Where no exact powers exist for what it chose over whole steps, or sizes are beyond whole steps, nothing is in hand.
    What an earlier schedule decided is proven good enough by the LP relaxation, or hinted at.
    """
    apart = [np.ones(instance.intervals, dtype=bool) for _ in instance.stores]
    search = _Search(instance, apart, seed, limits, watch, limits.clock() + seconds, by="cp_sat")
    assembled = search.assemble()
    if earlier is not None:
        search.relax(assembled)
        _start_from(search, assembled, earlier)
        if search.is_proven():
            return search.solution()
    try:
        endings = (search.choose_near(assembled), search.solve(assembled))
    except cp_sat.BeyondWholeSteps:
        return replace(search.solution(), plans=None, margin=None)
    for ending in endings:
        if ending.values is not None and not search.is_proven():
            mixed = mixed_modes(assembled.columns, ending.values)
            search.keep(assembled, ending, mixed, has_loose_modes=True)
    return search.solution()


def _start_from(search: _Search, assembled: Assembled, earlier: tuple[UnitPlan, ...] | None) -> None:
    """Put a schedule with the choices of an earlier one in hand, if the request still allows one."""
    if earlier is None or not is_of_shape(search.instance, earlier):
        return
    kept = search.solve_little(as_it_was(assembled, earlier))
    if kept.values is None:
        # its powers are not possible any more; what was on, and which way, may still be
        kept = search.solve_choices(with_its_choices(assembled, earlier))
    if kept.values is not None:
        search.keep_earlier(assembled, kept)
        search.has_start = search.plans is not None


def _first_schedule(search: _Search, assembled: Assembled, relaxed: Floats) -> None:
    """Find a schedule near the LP relaxation: what is whole there stays, the few choices left are a small model.

    The relaxation's bound is proven, and often enough; otherwise the schedule is what is in hand if time runs out.
    Where what stays leaves no schedule, the modes as fractions give one.
    """
    near = search.solve_near(assembled.with_whole_fixed(relaxed))
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
    return bound - margin <= allowed_gap(instance, margin) * (1 + 1e-6) + 1e-9


def allowed_gap(instance: Instance, margin: float) -> float:
    """Give how far above a margin its bound may lie, money."""
    return max(instance.absolute_gap, instance.relative_gap * max(abs(margin), MONEY_UNIT))
