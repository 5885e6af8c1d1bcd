"""Every rule of an instance in one model, and what can be done to that model between two solves.

A store that may charge and discharge at once is a relaxation of a store, tangents below a generator's quadratic cost
are one of its cost: both are tightened only where an answer makes use of them.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy.sparse import csr_matrix, vstack

from workers.planning.delivery import deliveries_of
from workers.planning.instance import Instance
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
    stored_for_hours,
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
from workers.planning.units import Booleans, Floats

INFINITE = float("inf")
MIXED_MW = 1e-7
"""Charging and discharging at once beyond this counts as mixing modes."""

WHOLE = 1e-6
"""A column this near to a whole number counts as whole."""

CHEAP_FUEL = 1e-9
"""Fuel cost that lies below the true one by more than this, money per interval, asks for a tangent."""


@dataclass(frozen=True)
class UnitPlan:
    """What a unit does, T values each: net power into the grid, MW; whether on; reserve held by product, MW."""

    power_mw: Floats
    is_on: Booleans | None
    reserve_mw: dict[int, Floats]


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

    def without_integers(self) -> "Assembled":
        """Let every column take any value between its bounds: the LP relaxation."""
        return replace(self, matrix=replace(self.matrix, integer=np.zeros_like(self.matrix.integer)))

    def with_whole_fixed(self, values: Floats) -> "Assembled":
        """Fix the integer columns that are whole in a point of the LP relaxation."""
        matrix, whole = self.matrix, np.round(values)
        stays = matrix.integer & (np.abs(values - whole) < WHOLE)
        lower, upper = np.where(stays, whole, matrix.lower), np.where(stays, whole, matrix.upper)
        return replace(self, matrix=replace(matrix, lower=lower, upper=upper, integer=matrix.integer & ~stays))

    def with_margin_at_least(self, margin: float) -> "Assembled":
        """Ask for a margin: a model without a point then proves that there is none so good."""
        matrix = self.matrix
        earns = csr_matrix(matrix.money)
        return replace(
            self,
            matrix=replace(
                matrix,
                rows=vstack([matrix.rows, earns], format="csr"),
                row_lower=np.append(matrix.row_lower, margin - matrix.constant),
                row_upper=np.append(matrix.row_upper, INFINITE),
            ),
        )

    def with_modes_as_fractions(self) -> "Assembled":
        """Let the mode columns take any value between 0 and 1."""
        integer = self.matrix.integer.copy()
        for modes in self.modes:
            integer[modes.columns] = False
        return replace(self, matrix=replace(self.matrix, integer=integer))


def assemble(
    instance: Instance,
    apart: list[Booleans],
    tangents: Sequence[Tangents] = (),
    *,
    by_pyomo: bool = True,
    is_tightened: bool = True,
) -> Assembled:
    """Write every rule of an instance into one model; `apart` says per store where modes are exclusive by a binary.

    The dozens of small questions of a diagnosis skip Pyomo, which takes a third of their time. A model that is
    `is_tightened` has rows that no schedule needs and that make its LP relaxation better.
    """
    model = Model()
    columns = FleetColumns(instance, tuple(unit_columns(model, unit, instance.products) for unit in instance.units))
    modes = tuple(_add_store(model, instance, store, where) for store, where in zip(columns.stores, apart, strict=True))
    for unit in columns.units:
        _add_unit(model, instance, unit)
    for more in tangents:
        generator = columns.generators[more.generator]
        model.rows(0.0, INFINITE, *fuel_cost.tangent(generator, more.where, more.points_mw))
    for meter in instance.connections:
        connection_limits.add(model, columns, meter)
        lots.add(model, columns, meter)
    settlement.add(model, columns)
    counted = [_add_row(model, columns, row) for row in instance.rows]
    if is_tightened:
        _tighten(model, columns, counted)
    return Assembled(columns, modes, highs.matrix_of(model.as_pyomo()) if by_pyomo else _matrix(model))


def _matrix(model: Model) -> highs.Matrix:
    return highs.Matrix(
        money=model.money,
        constant=model.constant,
        lower=model.lower,
        upper=model.upper,
        integer=model.integer,
        rows=model.matrix(),
        row_lower=model.row_lower,
        row_upper=model.row_upper,
    )


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


def _tighten(model: Model, columns: FleetColumns, counted: Sequence[Columns | None]) -> None:
    """Bind stored energy to delivered hours for every store whose hours take most of what it can; by row `counted`."""
    instance = columns.instance
    by_store: dict[int, list[tuple[HoursRow, Columns]]] = {}
    for row, members in zip(instance.rows, counted, strict=True):
        if members is not None and isinstance(row, HoursRow) and row.discharging is not None:
            by_store.setdefault(row.discharging, []).append((row, members))
    for number, asked in by_store.items():
        store = columns.units[number]
        if not isinstance(store, StoreColumns):
            continue
        for deliveries in deliveries_of(store.unit, [row for row, _ in asked], instance.hours, instance.intervals):
            if stored_for_hours.is_worth_adding(deliveries):
                where = np.full(instance.intervals, -1)
                for row, members in asked:
                    if any(row is each for each in deliveries.rows):
                        where[list(row.intervals)] = members
                stored_for_hours.add(model, store, deliveries, where)


def _add_row(model: Model, columns: FleetColumns, row: CommitmentRow) -> Columns | None:
    """Add a row of a commitment; of hours give the columns that say where they count."""
    if isinstance(row, HoursRow):
        return hours_at_least.add(model, columns, row)
    if isinstance(row, CeilingRow):
        hours_at_most.add(model, columns, row)
    elif isinstance(row, FirmRow):
        firm_delivery.add(model, columns, row)
    elif isinstance(row, EnergyRow):
        energy_totals.add(model, columns, row)
    elif isinstance(row, HoldingRow):
        reserve_holding.add(model, columns, row)
    else:
        raise TypeError(f"no rule for {row}")
    return None


def where_mixing_may_pay(instance: Instance) -> list[Booleans]:
    """Find where burning energy could earn: a price at or below zero, in a store that loses some on the way."""
    cheap: Booleans = np.minimum(instance.buy, instance.sell) <= 0
    return [np.zeros_like(cheap) if store.is_lossless else cheap.copy() for store in instance.stores]


def mixed_modes(columns: FleetColumns, values: Floats) -> list[Booleans]:
    """Find where a store charges and discharges at once; for a lossless one that is the same as the difference."""
    found = []
    for store in columns.stores:
        both = np.minimum(values[store.charge], values[store.discharge]) > MIXED_MW
        found.append(both & (not store.unit.is_lossless))
    return found


def unmixed(assembled: Assembled, values: Floats, mixed: list[Booleans]) -> highs.Matrix:
    """Fix every discrete choice, and every mode to the direction in which its stored energy moves."""
    matrix = highs.fixed(assembled.matrix, values)
    lower, upper = matrix.lower.copy(), matrix.upper.copy()
    for store, modes in zip(assembled.columns.stores, assembled.modes, strict=True):
        discharges = ~_fills(store, values)[modes.intervals]
        lower[modes.columns] = upper[modes.columns] = discharges.astype(float)
    return with_closed(assembled, replace(matrix, lower=lower, upper=upper), values, mixed)


def with_closed(assembled: Assembled, matrix: highs.Matrix, values: Floats, mixed: list[Booleans]) -> highs.Matrix:
    """Close, where modes are mixed, the direction against which the stored energy moves."""
    upper = matrix.upper.copy()
    for store, where in zip(assembled.columns.stores, mixed, strict=True):
        fills = _fills(store, values)
        upper[store.discharge[where & fills]] = 0.0
        upper[store.charge[where & ~fills]] = 0.0
    return replace(matrix, upper=upper)


def _fills(store: StoreColumns, values: Floats) -> Booleans:
    charged = values[store.charge] * store.unit.charge_efficiency
    fills: Booleans = charged > values[store.discharge] / store.unit.discharge_efficiency
    return fills


def tangents_needed(columns: FleetColumns, values: Floats, hours: float) -> list[Tangents]:
    """Give tangents at the outputs at which the model's fuel cost is too low."""
    found = []
    for number, unit in enumerate(columns.generators):
        where = np.flatnonzero(fuel_cost.too_low(unit, values, hours) > CHEAP_FUEL)
        if len(where):
            found.append(Tangents(number, where, values[unit.output[where]]))
    return found


def tangents_at(columns: FleetColumns, values: Floats) -> list[Tangents]:
    """Give tangents at every output of a schedule: there the model's fuel cost cannot be too low again."""
    found = []
    for number, unit in enumerate(columns.generators):
        where = np.flatnonzero(values[unit.output] > 0)
        if unit.squared is not None and len(where):
            found.append(Tangents(number, where, values[unit.output[where]]))
    return found


def with_tangents(assembled: Assembled, matrix: highs.Matrix, tangents: Sequence[Tangents]) -> highs.Matrix:
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


def plans_of(columns: FleetColumns, values: Floats) -> tuple[UnitPlan, ...]:
    """Read what each unit does from the values of the columns."""
    return tuple(
        UnitPlan(
            power_mw=np.asarray(sum(factor * values[part] for part, factor in unit.net)),
            is_on=values[unit.is_on] > 0.5 if isinstance(unit, GeneratorColumns) else None,
            reserve_mw={product: values[held] for product, held in unit.reserve.items()},
        )
        for unit in columns.units
    )
