"""Net power changes by no more than the ramp from one interval to the next.

    -r[a]*h <= (d - c)[a,t] - (d - c)[a,t-1] <= r[a]*h                                 (1)

r    ramp, MW per hour; h  interval length, hours; (d - c)[a,-1] is the power before the window

(1) does not bind into an interval in which an outage lowers what the store can do: a trip is a fact.
"""

import numpy as np

from workers.planning.model import Model
from workers.planning.rules.columns import StoreColumns


def add(model: Model, columns: StoreColumns) -> None:
    """Add the ramp of one store; nothing without one."""
    store = columns.unit
    if store.ramp_mw is None:
        return
    step, before = store.ramp_mw, store.power_before_mw
    if store.ramp_binds[0]:
        model.rows(before - step, before + step, (columns.discharge[:1], 1.0), (columns.charge[:1], -1.0))
    later = np.flatnonzero(store.ramp_binds[1:]) + 1
    if len(later):
        model.rows(
            -step,
            step,
            (columns.discharge[later], 1.0),
            (columns.charge[later], -1.0),
            (columns.discharge[later - 1], -1.0),
            (columns.charge[later - 1], 1.0),
        )
