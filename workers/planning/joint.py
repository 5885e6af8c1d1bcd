"""One model for plants that something couples: assemble the rules, solve, and never mix modes.

A store that may charge and discharge at once is a relaxation of a store. It is solved first, with the binaries of
`rules.exclusive_modes` only where mixing could pay, and among several stores with those as fractions at first. Where
the answer mixes, a linear polish with every discrete choice and the modes fixed makes a schedule of it, often within
the gap; if not, the binaries go in and the model is solved again from there. The quadratic part of a generator's cost
is treated alike: tangents below it, the exact cost of what is found, more tangents there. A relaxation's bound is true,
and an infeasible one proves the request infeasible.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from time import perf_counter

import numpy as np
from scipy.sparse import vstack

from workers.planning.instance import Instance
from workers.planning.limits import AUDIT_SHARE, Limits, Unwatched, Watch
from workers.planning.model import Columns, Model
from workers.planning.rows import CeilingRow, CommitmentRow, EnergyRow, FirmRow, HoldingRow, HoursRow
from workers.planning.rules import (
    connection_limits,
    daily_cycles,
    energy_needs,
    energy_totals,
    exclusive_modes,
    final_energy,
    firm_delivery,
    fuel_cost,
    hours_at_least,
    hours_at_most,
    lots,
    minimum_power,
    output_limits,
    output_ramps,
    ramps,
    renewable_cost,
    reserve_backing,
    reserve_holding,
    reserve_income,
    runs,
    settlement,
    start_costs,
    stored_energy,
    unit_states,
    wear,
)
from workers.planning.rules.columns import (
    FleetColumns,
    FlexibleLoadColumns,
    GeneratorColumns,
    RenewableColumns,
    StoreColumns,
    UnitColumns,
    unit_columns,
)
from workers.planning.rules.exclusive_modes import Modes
from workers.planning.solvers import highs
from workers.planning.solvers.ending import Ending, Stopped
from workers.planning.units import Booleans, Floats

INFINITE = float("inf")
MIXED_MW = 1e-7
"""Charging and discharging at once beyond this counts as mixing modes."""

ROUNDS_BEFORE_WHOLE_STORES = 2
MOST_ROUNDS = 12
MOST_TANGENT_ROUNDS = 12
EXACT_ENOUGH = 1e-9
"""Share of the margin by which the model's fuel cost may miss the true one."""

MONEY_UNIT = 1.0
"""Gaps are measured against at least one unit of the currency (contract, section 6)."""


@dataclass(frozen=True)
class UnitPlan:
    """What a unit does, T values each: net power into the grid, MW; whether on; reserve held by product, MW."""

    power_mw: Floats
    is_on: Booleans | None
    reserve_mw: dict[int, Floats]


@dataclass(frozen=True)
class Solution:
    """What was found for some units: their plans (None: nothing feasible in hand), margin, a proven upper bound."""

    stopped: Stopped
    plans: tuple[UnitPlan, ...] | None
    margin: float | None
    bound: float
    build_seconds: float
    solver_seconds: float


@dataclass(frozen=True)
class Tangents:
    """Further tangent points of a generator's squared output: its number among the generators, where, at which MW."""

    generator: int
    where: Columns
    points_mw: Floats


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

    def solve(self, assembled: Assembled, start: Floats | None = None) -> Ending:
        """Solve, and take over what is proven; `start` is a feasible point to begin from."""
        ending = self._run(assembled.matrix, self.ends - self.limits.clock(), self.watch, start)
        self.last = ending.stopped
        self.bound = min(self.bound, ending.bound)
        return ending

    def keep(
        self, assembled: Assembled, ending: Ending, mixed: list[Booleans], *, has_loose_modes: bool = False
    ) -> Floats | None:
        """Make a schedule of what a model found and keep the best; also after time or patience ran out.

        Discrete choices and modes stay; powers are settled by an LP, with tangents at the outputs it finds until the
        model's fuel cost is the true one. What mixes nothing and burns no square is a schedule as it is.
        """
        polished: Ending | None = ending
        is_mixed = has_loose_modes or any(where.any() for where in mixed)
        if is_mixed or self._missing_cost(assembled, ending) > 0:
            polished = self._polish(assembled, ending, mixed)
        if polished is None or polished.values is None or polished.margin is None:
            return None
        margin = polished.margin - self._missing_cost(assembled, polished)
        if self.margin is None or margin > self.margin:
            self.margin, self.plans = margin, _plans(assembled.columns, polished.values)
        return polished.values

    def _polish(self, assembled: Assembled, ending: Ending, mixed: list[Booleans]) -> Ending | None:
        """Give the best point of the LP that is left when everything discrete is fixed; None where there is none."""
        if ending.values is None:
            return None
        matrix, best = _unmixed(assembled, ending.values, mixed), None
        for _ in range(MOST_TANGENT_ROUNDS):
            left = max(self.ends - self.limits.clock(), self.limits.seconds * AUDIT_SHARE / 2)
            found = self._run(matrix, left, Unwatched(), None)
            if found.values is None or found.margin is None:
                return best
            best = found
            rows = _tangents(assembled.columns, found.values, self.instance.hours)
            if self._missing_cost(assembled, found) <= EXACT_ENOUGH * max(1.0, abs(found.margin)) or not rows:
                return best
            matrix = _with_tangents(assembled, matrix, rows)
        return best

    def _missing_cost(self, assembled: Assembled, ending: Ending) -> float:
        """Give by how much the model's fuel cost lies below the true one, money."""
        if ending.values is None:
            return 0.0
        columns, hours = assembled.columns, self.instance.hours
        return float(sum(fuel_cost.too_low(unit, ending.values, hours).sum() for unit in columns.generators))

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

    def is_proven(self) -> bool:
        return self.margin is not None and is_within_gap(self.instance, self.margin, self.bound)

    def tighten(self, assembled: Assembled, ending: Ending, mixed: list[Booleans]) -> bool:
        """Keep modes apart where they were mixed, add tangents where fuel was too cheap; tell whether that is news."""
        before = sum(int(where.sum()) for where in self.apart) + len(self.tangents)
        for where, found in zip(self.apart, mixed, strict=True):
            where |= found if self.rounds <= ROUNDS_BEFORE_WHOLE_STORES else np.bool_(found.any())
        if ending.values is not None:
            self.tangents += _tangents(assembled.columns, ending.values, self.instance.hours)
        return sum(int(where.sum()) for where in self.apart) + len(self.tangents) > before

    def solution(self) -> Solution:
        stopped = Stopped.WITHIN_GAP if self.is_proven() else self.last
        return Solution(stopped, self.plans, self.margin, self.bound, self.build_seconds, self.solver_seconds)


def solve_jointly(
    instance: Instance, limits: Limits, watch: Watch, *, seed: int, seconds: float, everywhere: bool = False
) -> Solution:
    """Plan all units of an instance in one model; `everywhere` puts in every binary from the start."""
    apart = [where | np.bool_(everywhere) for where in _where_mixing_may_pay(instance)]
    search = _Search(instance, apart, seed, limits, watch, limits.clock() + seconds)
    assembled = search.assemble()
    start = None
    if len(instance.units) > 1 and any(len(modes.columns) for modes in assembled.modes):
        start = _first_schedule(search, assembled)
        if search.is_proven() or search.last is not Stopped.WITHIN_GAP:
            return search.solution()
    while True:
        search.rounds += 1
        ending = search.solve(assembled, start)
        if ending.values is None:
            return search.solution()
        mixed = _mixed(assembled.columns, ending.values)
        search.keep(assembled, ending, mixed)
        if search.is_proven() or ending.stopped is not Stopped.WITHIN_GAP or search.rounds == MOST_ROUNDS:
            return search.solution()
        if not search.tighten(assembled, ending, mixed):
            return search.solution()
        assembled, start = search.assemble(), None


def _first_schedule(search: _Search, assembled: Assembled) -> Floats | None:
    """Solve with the modes as fractions: a bound, and usually a schedule to start from, in a fraction of the time."""
    loose = assembled.with_modes_as_fractions()
    ending = search.solve(loose)
    if ending.values is None:
        return None
    return search.keep(loose, ending, _mixed(loose.columns, ending.values), has_loose_modes=True)


def assemble(instance: Instance, apart: list[Booleans], tangents: Sequence[Tangents] = ()) -> Assembled:
    """Write every rule of an instance into one model; `apart` says per store where modes are exclusive by a binary."""
    model = Model()
    columns = FleetColumns(instance, tuple(unit_columns(model, unit, instance.products) for unit in instance.units))
    modes = tuple(_add_store(model, instance, store, where) for store, where in zip(columns.stores, apart, strict=True))
    for unit in columns.units:
        _add_unit(model, instance, unit)
    for more in tangents:
        generator = columns.generators[more.generator]
        model.rows(0.0, INFINITE, *fuel_cost.tangent(generator, more.where, more.points_mw))
    for meter in (*instance.meters, instance.fleet):
        connection_limits.add(model, columns, meter)
        lots.add(model, columns, meter)
    settlement.add(model, columns)
    for row in instance.rows:
        _add_row(model, columns, row)
    return Assembled(columns, modes, highs.matrix_of(model.as_pyomo()))


def _add_store(model: Model, instance: Instance, store: StoreColumns, apart: Booleans) -> Modes:
    stored_energy.add(model, store, instance.hours)
    modes = exclusive_modes.add(model, store, apart)
    minimum_power.add(model, store)
    runs.add(model, store)
    ramps.add(model, store)
    daily_cycles.add(model, store, instance.hours)
    final_energy.add(model, store)
    wear.add(model, store, instance.hours)
    reserve_backing.add(model, store, instance.products)
    return modes


def _add_unit(model: Model, instance: Instance, unit: UnitColumns) -> None:
    reserve_income.add(model, unit, instance.products, instance.hours)
    if isinstance(unit, GeneratorColumns):
        unit_states.add(model, unit)
        output_limits.add(model, unit, instance.products)
        output_ramps.add(model, unit)
        fuel_cost.add(model, unit, instance.hours)
        start_costs.add(model, unit, instance.hours)
    elif isinstance(unit, RenewableColumns):
        renewable_cost.add(model, unit, instance.hours)
    elif isinstance(unit, FlexibleLoadColumns):
        energy_needs.add(model, unit, instance.hours)


def _add_row(model: Model, columns: FleetColumns, row: CommitmentRow) -> None:
    if isinstance(row, HoursRow):
        hours_at_least.add(model, columns, row)
    elif isinstance(row, CeilingRow):
        hours_at_most.add(model, columns, row)
    elif isinstance(row, FirmRow):
        firm_delivery.add(model, columns, row)
    elif isinstance(row, EnergyRow):
        energy_totals.add(model, columns, row)
    elif isinstance(row, HoldingRow):
        reserve_holding.add(model, columns, row)
    else:
        raise TypeError(f"no rule for {row}")


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
        found.append(both & (not store.unit.is_lossless))
    return found


def _unmixed(assembled: Assembled, values: Floats, mixed: list[Booleans]) -> highs.Matrix:
    """Fix every discrete choice, and every mode to the direction in which its stored energy moves."""
    matrix = highs.fixed(assembled.matrix, values)
    lower, upper = matrix.lower.copy(), matrix.upper.copy()
    for store, modes, where in zip(assembled.columns.stores, assembled.modes, mixed, strict=True):
        charge, discharge = values[store.charge], values[store.discharge]
        fills = charge * store.unit.charge_efficiency > discharge / store.unit.discharge_efficiency
        upper[store.discharge[where & fills]] = 0.0
        upper[store.charge[where & ~fills]] = 0.0
        lower[modes.columns] = upper[modes.columns] = (~fills[modes.intervals]).astype(float)
    return replace(matrix, lower=lower, upper=upper)


def _tangents(columns: FleetColumns, values: Floats, hours: float) -> list[Tangents]:
    """Give tangents at the outputs at which the model's fuel cost is too low."""
    found = []
    for number, unit in enumerate(columns.generators):
        where = np.flatnonzero(fuel_cost.too_low(unit, values, hours) > MONEY_UNIT * EXACT_ENOUGH)
        if len(where):
            found.append(Tangents(number, where, values[unit.output[where]]))
    return found


def _with_tangents(assembled: Assembled, matrix: highs.Matrix, tangents: Sequence[Tangents]) -> highs.Matrix:
    """Add tangent rows to a matrix."""
    extra = Model()
    extra.columns(len(matrix.money), 0.0, 0.0)
    for more in tangents:
        generator = assembled.columns.generators[more.generator]
        extra.rows(0.0, INFINITE, *fuel_cost.tangent(generator, more.where, more.points_mw))
    rows = extra.matrix()
    return replace(
        matrix,
        rows=vstack([matrix.rows, rows], format="csr"),
        row_lower=np.concatenate([matrix.row_lower, np.zeros(rows.shape[0])]),
        row_upper=np.concatenate([matrix.row_upper, np.full(rows.shape[0], INFINITE)]),
    )


def _plans(columns: FleetColumns, values: Floats) -> tuple[UnitPlan, ...]:
    return tuple(
        UnitPlan(
            power_mw=np.asarray(sum(factor * values[part] for part, factor in unit.net)),
            is_on=values[unit.is_on] > 0.5 if isinstance(unit, GeneratorColumns) else None,
            reserve_mw={product: values[held] for product, held in unit.reserve.items()},
        )
        for unit in columns.units
    )
