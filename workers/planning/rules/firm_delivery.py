"""At least so much power in each interval.

    p[t] >= due[t] - short[t] - M[t] * z[t]                                            (1)
    0 <= short[t] <= due[t],  short[t] >= due[t] * z[t]                                (2)

p  sign * (sum of power[a,t] - L[t]), MW; short  missing power, MW
z  1 where the power flows the other way; M  how much of it can

A binding row has neither short nor z. A priced one pays for h*short: never more than what is due, even where the power
flows the other way.
"""

import numpy as np

from workers.planning.model import INFINITE, Model
from workers.planning.rows import FirmRow, most_against
from workers.planning.rules.columns import FleetColumns


def add(model: Model, columns: FleetColumns, row: FirmRow) -> None:
    """Add one row of a commitment."""
    where = np.array([t for t in row.intervals if t not in row.excused and row.due_mw[t] > 0], dtype=np.int64)
    if len(where) == 0:
        return
    due = row.due_mw[where]
    terms = [(part[where], row.sign * factor) for part, factor in columns.net(row.units)]
    lower = due + row.sign * row.load_mw[where]
    if row.price is None:
        model.rows(lower, INFINITE, *(terms or [(model.columns(len(where), 0.0, 0.0), 1.0)]))
        return
    short = model.columns(len(where), 0.0, due)
    model.earn(short, -columns.instance.hours * row.price)
    against = np.maximum(most_against(columns.instance.units, row)[where], 0.0)
    other_way = model.binaries(against > 0)
    model.rows(lower, INFINITE, *terms, (short, 1.0), (other_way, against))
    model.rows(0.0, INFINITE, (short, 1.0), (other_way, -due))
