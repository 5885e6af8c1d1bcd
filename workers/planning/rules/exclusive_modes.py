"""A store never charges and discharges in one interval.

    c[a,t] <= C[a,t] * (1 - u[a,t])                                                    (1)
    d[a,t] <= D[a,t] * u[a,t]                                                          (2)

u    1 where the store discharges, 0 where it charges
C,D  power limits, MW

Doing both only burns energy, which rarely pays: the binaries go in where it might (prices at or below zero) or
where a relaxed answer did it. A model without some of them is a relaxation, so its bound and its proof that
nothing is feasible stand for the request.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.planning.model import INFINITE, Columns, Model
from workers.planning.rules.columns import StoreColumns


@dataclass(frozen=True)
class Modes:
    """The mode columns of a store, and the intervals they stand for."""

    columns: Columns
    intervals: NDArray[np.int64]


def add(model: Model, columns: StoreColumns, where: NDArray[np.bool_]) -> Modes:
    """Add (1) and (2) in the chosen intervals; a store with on-off columns has them by its minimum powers."""
    store = columns.unit
    chosen = np.flatnonzero(where & store.can_charge & store.can_discharge)
    if columns.states is not None:
        chosen = chosen[:0]
    mode = model.columns(len(chosen), 0.0, 1.0, integer=True)
    if len(chosen):
        limit_c, limit_d = store.charge_limit_mw[chosen], store.discharge_limit_mw[chosen]
        model.rows(-INFINITE, limit_c, (columns.charge[chosen], 1.0), (mode, limit_c))
        model.rows(-INFINITE, 0.0, (columns.discharge[chosen], 1.0), (mode, -limit_d))
    return Modes(mode, chosen)
