"""Discharging wears a store.

    margin -= sum of h * w[a] * d[a,t]                                                 (1)

w    wear cost per MWh discharged at the terminals
"""

from workers.planning.model import Model
from workers.planning.rules.columns import StoreColumns


def add(model: Model, columns: StoreColumns, hours: float) -> None:
    """Add the wear cost of one store."""
    if columns.unit.wear_cost_per_mwh:
        model.earn(columns.discharge, -hours * columns.unit.wear_cost_per_mwh)
