"""While a store discharges (charges), it does so at its minimum power or above.

    D_min[a] * ud[a,t] <= d[a,t] <= D[a,t] * ud[a,t]                                   (1)
    C_min[a] * uc[a,t] <= c[a,t] <= C[a,t] * uc[a,t]                                   (2)
    ud[a,t] + uc[a,t] <= 1                                                             (3)

ud,uc  1 where the store discharges, charges; both 0 where it idles
"""

import numpy as np
from numpy.typing import NDArray

from workers.planning.model import INFINITE, Columns, Model
from workers.planning.rules.columns import StoreColumns


def add(model: Model, columns: StoreColumns) -> None:
    """Tie the on-off columns of a store to its powers; nothing for a store without them."""
    store, states = columns.unit, columns.states
    if states is None:
        return
    _tie(model, columns.discharge, states.discharging, store.min_discharge_mw, store.discharge_limit_mw)
    _tie(model, columns.charge, states.charging, store.min_charge_mw, store.charge_limit_mw)
    model.rows(-INFINITE, 1.0, (states.discharging, 1.0), (states.charging, 1.0))


def _tie(model: Model, power: Columns, is_on: Columns, lowest: float, highest: NDArray[np.float64]) -> None:
    model.rows(-INFINITE, 0.0, (power, 1.0), (is_on, -highest))
    if lowest > 0:
        model.rows(0.0, INFINITE, (power, 1.0), (is_on, -lowest))
