"""A store ends with what it owes the next window; what lies above it has a price.

    s[a,T] >= s_final[a] - short                                                       (1)
    margin += v[a] * (s[a,T] - s_final[a])                                             (2)

s_final  final target, MWh; v  value of stored energy, money per MWh
short    what is missing of the target, MWh; 0, unless a diagnosis looks for the nearest schedule and prices it
"""

from workers.planning.model import INFINITE, Model
from workers.planning.rules.columns import StoreColumns


def add(model: Model, columns: StoreColumns) -> None:
    """Add the final target and the value of what is left above it."""
    store, last = columns.unit, columns.stored[-1:]
    if store.target_price is None:
        model.rows(store.final_floor_mwh, INFINITE, (last, 1.0))
    else:
        short = model.columns(1, 0.0, store.final_floor_mwh)
        model.earn(short, -store.target_price)
        model.rows(store.final_floor_mwh, INFINITE, (last, 1.0), (short, 1.0))
    if store.final_value_per_mwh:
        model.earn(last, store.final_value_per_mwh)
        model.constant -= store.final_value_per_mwh * store.final_floor_mwh
