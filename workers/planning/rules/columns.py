"""The variables that the rules share: what each unit does, the power it nets to, the reserve it holds."""

from dataclasses import dataclass, field

import numpy as np

from workers.planning.flows import FlexibleLoadUnit, RenewableUnit
from workers.planning.generator import GeneratorUnit
from workers.planning.instance import Instance
from workers.planning.model import INFINITE, Columns, Model
from workers.planning.reserve import Product
from workers.planning.store import Store
from workers.planning.units import Unit

Net = list[tuple[Columns, float]]
Reserve = dict[int, Columns]
"""Columns of the reserve held of each product, T each, MW: the same column throughout a block."""


@dataclass(frozen=True)
class States:
    """Yes-or-no columns, T each: whether a store discharges, whether it charges; it idles where neither."""

    discharging: Columns
    charging: Columns


@dataclass(frozen=True)
class StoreColumns:
    """Columns of one store, T each: powers at the terminals in MW (both >= 0), energy at interval ends in MWh.

    `states` are there only where being on matters, `opening` (one column, MWh) only where the energy at the start is
    left open.
    """

    unit: Store
    charge: Columns
    discharge: Columns
    stored: Columns
    states: States | None = None
    reserve: Reserve = field(default_factory=dict)
    opening: Columns | None = None

    @property
    def net(self) -> Net:
        """Terms of the net power into the grid."""
        return [(self.discharge, 1.0), (self.charge, -1.0)]


@dataclass(frozen=True)
class GeneratorColumns:
    """Columns of one generator, T each: output in MW, whether on, starts, stops; `squared` is P^2 from below, MW^2."""

    unit: GeneratorUnit
    output: Columns
    is_on: Columns
    starts: Columns
    stops: Columns
    squared: Columns | None
    reserve: Reserve = field(default_factory=dict)

    @property
    def net(self) -> Net:
        """Terms of the net power into the grid."""
        return [(self.output, 1.0)]


@dataclass(frozen=True)
class RenewableColumns:
    """Columns of one renewable: output, T, MW."""

    unit: RenewableUnit
    output: Columns
    reserve: Reserve = field(default_factory=dict)

    @property
    def net(self) -> Net:
        """Terms of the net power into the grid."""
        return [(self.output, 1.0)]


@dataclass(frozen=True)
class FlexibleLoadColumns:
    """Columns of one flexible load: draw, T, MW; whether it draws, where that matters."""

    unit: FlexibleLoadUnit
    draw: Columns
    drawing: Columns | None
    reserve: Reserve = field(default_factory=dict)

    @property
    def net(self) -> Net:
        """Terms of the net power into the grid."""
        return [(self.draw, -1.0)]


UnitColumns = StoreColumns | GeneratorColumns | RenewableColumns | FlexibleLoadColumns


@dataclass(frozen=True)
class FleetColumns:
    """Columns of every unit of an instance, in its order."""

    instance: Instance
    units: tuple[UnitColumns, ...]

    @property
    def stores(self) -> tuple[StoreColumns, ...]:
        """The columns of the stores."""
        return tuple(unit for unit in self.units if isinstance(unit, StoreColumns))

    @property
    def generators(self) -> tuple[GeneratorColumns, ...]:
        """The columns of the generators."""
        return tuple(unit for unit in self.units if isinstance(unit, GeneratorColumns))

    def net(self, units: tuple[int, ...]) -> Net:
        """Give the terms whose sum is the net power of these units, MW per interval, positive into the grid."""
        return [term for number in units for term in self.units[number].net]

    def held(self, units: tuple[int, ...], *, up: bool) -> Net:
        """Give the terms whose sum is the up- (or down-) reserve that these units hold, MW per interval."""
        return [
            (held, 1.0)
            for number in units
            for product, held in self.units[number].reserve.items()
            if (self.instance.products[product].up if up else self.instance.products[product].down)
        ]


def unit_columns(model: Model, unit: Unit, products: tuple[Product, ...]) -> UnitColumns:
    """Add the columns of a unit, bounded by its limits."""
    if isinstance(unit, Store):
        return _store(model, unit, products)
    if isinstance(unit, GeneratorUnit):
        return _generator(model, unit, products)
    if isinstance(unit, RenewableUnit):
        lowest = 0.0 if unit.curtailable else unit.available_mw
        return RenewableColumns(unit, model.columns(len(unit.available_mw), lowest, unit.available_mw))
    if isinstance(unit, FlexibleLoadUnit):
        draw = model.columns(len(unit.limit_mw), 0.0, unit.limit_mw * unit.can_draw)
        has_states = unit.min_draw_mw > 0 or not unit.interruptible
        return FlexibleLoadColumns(unit, draw, model.binaries(unit.can_draw) if has_states else None)
    raise ValueError(f"no columns for {unit}")


def _reserve(model: Model, unit: Unit, products: tuple[Product, ...]) -> Reserve:
    """Add a column per block of each product that a unit may hold; only stores and generators hold any.

    Without an upper bound: what backs it bounds it, and with one HiGHS 1.16 took 75 s and more instead of 9 s for the
    published system of 40 units with reserve.
    """
    reserve: Reserve = {}
    for number in unit.products:
        block = products[number].block
        if len(block):
            reserve[number] = model.columns(int(block.max()) + 1, 0.0, INFINITE)[block]
    return reserve


def _store(model: Model, store: Store, products: tuple[Product, ...]) -> StoreColumns:
    """Add 0 <= c <= C, 0 <= d <= D, floor <= s <= ceiling; a direction with less than the minimum left is closed."""
    count = len(store.charge_limit_mw)
    charge = model.columns(count, 0.0, store.most_in_mw)
    discharge = model.columns(count, 0.0, store.most_out_mw)
    stored = model.columns(count, store.floor_mwh, store.ceiling_mwh)
    states = None
    if store.has_states:
        states = States(model.binaries(store.can_discharge), model.binaries(store.can_charge))
    opening = model.columns(1, store.least_initial_mwh, store.most_initial_mwh) if store.is_initial_free else None
    return StoreColumns(store, charge, discharge, stored, states, _reserve(model, store, products), opening)


def _generator(model: Model, generator: GeneratorUnit, products: tuple[Product, ...]) -> GeneratorColumns:
    count = len(generator.limit_mw)
    most = generator.most_out_mw
    squared = model.columns(count, 0.0, np.square(most)) if generator.quadratic_per_mw2h else None
    return GeneratorColumns(
        generator,
        model.columns(count, 0.0, most),
        model.binaries(generator.can_run),
        # no start in a trip: the turn-on inequality asks nothing there, and half a start would make the next one cheap
        model.columns(count, 0.0, generator.can_run.astype(float)),
        model.columns(count, 0.0, 1.0),
        squared,
        _reserve(model, generator, products),
    )
