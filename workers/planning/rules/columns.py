"""The variables that the rules share: what a store does, and the power it nets to."""

from dataclasses import dataclass

from workers.planning.instance import Instance
from workers.planning.model import Columns, Model
from workers.planning.store import Store


@dataclass(frozen=True)
class States:
    """Yes-or-no columns, T each: whether a store discharges, whether it charges; it idles where neither."""

    discharging: Columns
    charging: Columns


@dataclass(frozen=True)
class StoreColumns:
    """Columns of one store, T each: powers at the terminals in MW (both >= 0), energy at interval ends in MWh.

    `states` are there only where being on matters.
    """

    store: Store
    charge: Columns
    discharge: Columns
    stored: Columns
    states: States | None = None


@dataclass(frozen=True)
class FleetColumns:
    """Columns of every store of an instance, in its order."""

    instance: Instance
    stores: tuple[StoreColumns, ...]

    def net(self, stores: tuple[int, ...]) -> list[tuple[Columns, float]]:
        """Give the terms whose sum is the net power of these stores, MW per interval, positive into the grid."""
        terms: list[tuple[Columns, float]] = []
        for number in stores:
            terms += [(self.stores[number].discharge, 1.0), (self.stores[number].charge, -1.0)]
        return terms


def store_columns(model: Model, store: Store) -> StoreColumns:
    """Add the columns of a store, bounded by its limits: 0 <= c <= C, 0 <= d <= D, floor <= s <= ceiling.

    A direction in which not even the minimum power is left is closed for the interval.
    """
    count = len(store.charge_limit_mw)
    charge = model.columns(count, 0.0, store.charge_limit_mw * store.can_charge)
    discharge = model.columns(count, 0.0, store.discharge_limit_mw * store.can_discharge)
    stored = model.columns(count, store.floor_mwh, store.ceiling_mwh)
    if not store.has_states:
        return StoreColumns(store, charge, discharge, stored)
    states = States(model.binaries(store.can_discharge), model.binaries(store.can_charge))
    return StoreColumns(store, charge, discharge, stored, states)
