"""One model for stores that something couples: assemble the rules, solve, and never mix modes.

A store that may charge and discharge at once is a relaxation of a store. It is solved first, with the binaries of
`rules.exclusive_modes` only where mixing could pay, and among several stores with those as fractions at first. Where
the answer mixes, a linear polish with every discrete choice and the modes fixed makes a schedule of it, often within
the gap; if not, the binaries go in and the model is solved again from there. A relaxation's bound is true, and an
infeasible one proves the request infeasible.
"""

from dataclasses import dataclass, field, replace
from time import perf_counter

import numpy as np

from workers.planning.instance import Instance
from workers.planning.limits import AUDIT_SHARE, Limits, Unwatched, Watch
from workers.planning.model import Model
from workers.planning.rules import (
    connection_limits,
    daily_cycles,
    exclusive_modes,
    final_energy,
    hours_at_least,
    minimum_power,
    ramps,
    runs,
    settlement,
    stored_energy,
    wear,
)
from workers.planning.rules.columns import FleetColumns, store_columns
from workers.planning.rules.exclusive_modes import Modes
from workers.planning.solvers import highs
from workers.planning.solvers.ending import Ending, Stopped
from workers.planning.store import Booleans, Floats

INFINITE = float("inf")
MIXED_MW = 1e-7
"""Charging and discharging at once beyond this counts as mixing modes."""

ROUNDS_BEFORE_WHOLE_STORES = 2
MONEY_UNIT = 1.0
"""Gaps are measured against at least one unit of the currency (contract, section 6)."""


@dataclass(frozen=True)
class Solution:
    """What was found for some stores: net powers (None: nothing feasible in hand), margin, a proven upper bound."""

    stopped: Stopped
    power_mw: tuple[Floats, ...] | None
    margin: float | None
    bound: float
    build_seconds: float
    solver_seconds: float


@dataclass(frozen=True)
class Assembled:
    """A model with its columns, ready for a solver."""

    columns: FleetColumns
    modes: tuple[Modes, ...]
    matrix: highs.Matrix

    def with_modes_as_fractions(self) -> "Assembled":
        """Let the mode columns take any value between 0 and 1."""
        integer = self.matrix.integer.copy()
        for modes in self.modes:
            integer[modes.columns] = False
        return replace(self, matrix=replace(self.matrix, integer=integer))


@dataclass
class _Search:
    """The state of a solve: where modes are kept apart, what is in hand, what is proven, what it took."""

    instance: Instance
    apart: list[Booleans]
    seed: int
    limits: Limits
    watch: Watch
    ends: float
    best: Ending | None = None
    powers: tuple[Floats, ...] | None = None
    bound: float = INFINITE
    rounds: int = 0
    build_seconds: float = 0.0
    solver_seconds: float = 0.0
    last: Stopped = field(default=Stopped.OUT_OF_TIME)

    def assemble(self) -> Assembled:
        began = perf_counter()
        assembled = assemble(self.instance, self.apart)
        self.build_seconds += perf_counter() - began
        return assembled

    def solve(self, assembled: Assembled, start: Floats | None = None) -> Ending:
        """Solve, and take over what is proven; `start` is a feasible point to begin from."""
        ending = self._run(assembled.matrix, self.ends - self.limits.clock(), self.watch, start)
        self.last = ending.stopped
        self.bound = min(self.bound, ending.bound)
        return ending

    def keep_unmixed(self, assembled: Assembled, ending: Ending, mixed: list[Booleans]) -> Ending:
        """Make a schedule of what mixes modes; also after time or patience ran out, in the share left for the audit."""
        if ending.values is None:
            return ending
        left = max(self.ends - self.limits.clock(), self.limits.seconds * AUDIT_SHARE / 2)
        polished = self._run(_unmixed(assembled, ending.values, mixed), left, Unwatched(), None)
        self.keep(assembled, polished)
        return polished

    def _run(self, matrix: highs.Matrix, seconds: float, watch: Watch, start: Floats | None) -> Ending:
        instance = self.instance
        effort = highs.Effort(
            relative_gap=instance.relative_gap,
            absolute_gap=max(instance.absolute_gap, instance.relative_gap * MONEY_UNIT),
            seconds=seconds,
            seed=self.seed,
        )
        ending = highs.solve(matrix, effort, watch, start)
        self.solver_seconds += ending.seconds
        return ending

    def keep(self, assembled: Assembled, ending: Ending) -> None:
        if ending.values is None or ending.margin is None:
            return
        if self.best is None or self.best.margin is None or ending.margin > self.best.margin:
            self.best, self.powers = ending, _net_powers(assembled.columns, ending.values)

    def is_proven(self) -> bool:
        return (
            self.best is not None
            and self.best.margin is not None
            and is_within_gap(self.instance, self.best.margin, self.bound)
        )

    def keep_apart(self, mixed: list[Booleans]) -> bool:
        """Put the modes apart where they were mixed, in whole stores after some rounds; tell whether that is news."""
        before = sum(int(where.sum()) for where in self.apart)
        for where, found in zip(self.apart, mixed, strict=True):
            where |= found if self.rounds <= ROUNDS_BEFORE_WHOLE_STORES else np.bool_(found.any())
        return sum(int(where.sum()) for where in self.apart) > before

    def solution(self) -> Solution:
        stopped = Stopped.WITHIN_GAP if self.is_proven() else self.last
        margin = self.best.margin if self.best is not None else None
        return Solution(stopped, self.powers, margin, self.bound, self.build_seconds, self.solver_seconds)


def solve_jointly(
    instance: Instance, limits: Limits, watch: Watch, *, seed: int, seconds: float, everywhere: bool = False
) -> Solution:
    """Plan all stores of an instance in one model; `everywhere` puts in every binary from the start."""
    apart = [where | np.bool_(everywhere) for where in _where_mixing_may_pay(instance)]
    search = _Search(instance, apart, seed, limits, watch, limits.clock() + seconds)
    assembled = search.assemble()
    start = None
    if len(instance.stores) > 1 and any(len(modes.columns) for modes in assembled.modes):
        start = _first_schedule(search, assembled)
        if search.is_proven() or search.last is not Stopped.WITHIN_GAP:
            return search.solution()
    while True:
        search.rounds += 1
        ending = search.solve(assembled, start)
        if ending.values is None:
            return search.solution()
        mixed = _mixed(assembled.columns, ending.values)
        if not any(where.any() for where in mixed):
            search.keep(assembled, ending)
            return search.solution()
        search.keep_unmixed(assembled, ending, mixed)
        if search.is_proven() or ending.stopped is not Stopped.WITHIN_GAP or not search.keep_apart(mixed):
            return search.solution()
        assembled, start = search.assemble(), None


def _first_schedule(search: _Search, assembled: Assembled) -> Floats | None:
    """Solve with the modes as fractions: a bound, and usually a schedule to start from, in a fraction of the time."""
    loose = assembled.with_modes_as_fractions()
    ending = search.solve(loose)
    if ending.values is None:
        return None
    return search.keep_unmixed(loose, ending, _mixed(assembled.columns, ending.values)).values


def assemble(instance: Instance, apart: list[Booleans]) -> Assembled:
    """Write every rule of an instance into one model; `apart` says per store where modes are exclusive by a binary."""
    model, hours = Model(), instance.hours
    columns = FleetColumns(instance, tuple(store_columns(model, store) for store in instance.stores))
    modes = []
    for store, where in zip(columns.stores, apart, strict=True):
        stored_energy.add(model, store, hours)
        modes.append(exclusive_modes.add(model, store, where))
        minimum_power.add(model, store)
        runs.add(model, store)
        ramps.add(model, store)
        daily_cycles.add(model, store, hours)
        final_energy.add(model, store)
        wear.add(model, store, hours)
    for meter in (*instance.meters, instance.fleet):
        connection_limits.add(model, columns, meter)
    settlement.add(model, columns)
    for row in instance.rows:
        hours_at_least.add(model, columns, row)
    return Assembled(columns, tuple(modes), highs.matrix_of(model.as_pyomo()))


def is_within_gap(instance: Instance, margin: float, bound: float) -> bool:
    """Tell whether a bound proves a margin good enough; without a finite bound nothing is proven."""
    if not np.isfinite(bound):
        return False
    allowed = max(instance.absolute_gap, instance.relative_gap * max(abs(margin), MONEY_UNIT))
    return bound - margin <= allowed * (1 + 1e-6) + 1e-9


def _where_mixing_may_pay(instance: Instance) -> list[Booleans]:
    """Find where burning energy could earn: a price at or below zero, in a store that loses some on the way."""
    cheap: Booleans = np.minimum(instance.buy, instance.sell) <= 0
    return [np.zeros_like(cheap) if store.is_lossless else cheap.copy() for store in instance.stores]


def _mixed(columns: FleetColumns, values: Floats) -> list[Booleans]:
    """Find where a store charges and discharges at once; for a lossless one that is the same as the difference."""
    found = []
    for store in columns.stores:
        both = np.minimum(values[store.charge], values[store.discharge]) > MIXED_MW
        found.append(both & (not store.store.is_lossless))
    return found


def _unmixed(assembled: Assembled, values: Floats, mixed: list[Booleans]) -> highs.Matrix:
    """Fix every discrete choice, and every mode to the direction in which its stored energy moves."""
    matrix = highs.fixed(assembled.matrix, values)
    lower, upper = matrix.lower.copy(), matrix.upper.copy()
    for store, modes, where in zip(assembled.columns.stores, assembled.modes, mixed, strict=True):
        charge, discharge = values[store.charge], values[store.discharge]
        fills = charge * store.store.charge_efficiency > discharge / store.store.discharge_efficiency
        upper[store.discharge[where & fills]] = 0.0
        upper[store.charge[where & ~fills]] = 0.0
        lower[modes.columns] = upper[modes.columns] = (~fills[modes.intervals]).astype(float)
    return replace(matrix, lower=lower, upper=upper)


def _net_powers(columns: FleetColumns, values: Floats) -> tuple[Floats, ...]:
    return tuple(values[store.discharge] - values[store.charge] for store in columns.stores)
