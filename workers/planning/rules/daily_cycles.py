"""A day discharges no more than so many times the capacity.

    sum of h*d[a,t] over the local day  <=  max(0, n[a] * E[a] - what the day had discharged before)   (1)

n    cycles per day; E  energy capacity, MWh; d  discharging power at the terminals, MW
"""

import numpy as np

from workers.planning.model import INFINITE, Model
from workers.planning.rules.columns import StoreColumns


def add(model: Model, columns: StoreColumns, hours: float) -> None:
    """Add (1) for each local day of the window."""
    for allowance in columns.unit.discharge_allowances:
        model.row(-INFINITE, allowance.amount, (columns.discharge[np.array(allowance.intervals)], hours))
