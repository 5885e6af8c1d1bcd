"""At most so many hours with power above a threshold.

    sign * (sum of power[a,t] - L[t])  <=  theta + (M[t] - theta) * y[t]               (1)
    sum of h*y[t] over the row - excess  <=  hours allowed                             (2)

y  1 where the interval is above; theta  threshold less headroom, MW; M  the most power that limits allow, MW

An excused interval does not count, whatever the power. A priced row pays for its excess; a binding one has none.
"""

from math import floor

import numpy as np

from workers.planning.model import INFINITE, Model
from workers.planning.rows import CeilingRow, most_power
from workers.planning.rules.columns import FleetColumns


def add(model: Model, columns: FleetColumns, row: CeilingRow) -> None:
    """Add one row of a commitment."""
    hours = columns.instance.hours
    most = most_power(columns.instance.units, row)
    where = np.array([t for t in row.intervals if t not in row.excused and most[t] > row.threshold_mw], dtype=np.int64)
    above = model.columns(len(where), 0.0, 1.0, integer=True)
    if row.units and len(where):
        terms = [(part[where], row.sign * factor) for part, factor in columns.net(row.units)]
        upper = row.threshold_mw + row.sign * row.load_mw[where]
        model.rows(-INFINITE, upper, *terms, (above, row.threshold_mw - most[where]))
    elif len(where):
        model.rows(1.0, 1.0, (above, 1.0))
    if row.price is None:
        model.row(-INFINITE, floor(row.allowed_hours / hours + 1e-9), (above, 1.0))
        return
    excess = model.columns(1, 0.0, hours * len(row.intervals) + max(-row.allowed_hours, 0.0))
    model.earn(excess, -row.price)
    model.row(-INFINITE, row.allowed_hours, (above, hours), (excess, -1.0))
