"""At least, or at most, so much energy in one direction.

    e[t] >= p[t],  e[t] >= 0                  at most                                  (1)
    e[t] <= p[t] + M[t] * (1 - z[t]),  e[t] <= P[t] * z[t]        at least             (2)
    sum of h*e[t] over the row  >=  E - short,   <=  E + excess                        (3)

p  sign * (sum of power[a,t] - L[t]), MW; e  its positive part; z  1 where it flows in the row's direction
P,M  the most that can flow in it, and against it, MW

(2) needs a binary only where power can flow both ways.
"""

import numpy as np

from workers.planning.model import INFINITE, Columns, Model
from workers.planning.rows import EnergyRow, most_against, most_power
from workers.planning.rules.columns import FleetColumns


def add(model: Model, columns: FleetColumns, row: EnergyRow) -> None:
    """Add one row of a commitment."""
    hours, units = columns.instance.hours, columns.instance.units
    where = np.array(row.intervals, dtype=np.int64)
    most = np.maximum(most_power(units, row)[where], 0.0)
    against = np.maximum(most_against(units, row)[where], 0.0)
    flow = model.columns(len(where), 0.0, most)
    terms = [(part[where], row.sign * factor) for part, factor in columns.net(row.units)]
    load = row.sign * row.load_mw[where]
    if row.at_least:
        forward = model.columns(len(where), np.where(against > 0, 0.0, 1.0), 1.0, integer=True)
        model.rows(load - against, INFINITE, *terms, (flow, -1.0), (forward, -against))
        model.rows(-INFINITE, 0.0, (flow, 1.0), (forward, -most))
    else:
        model.rows(-INFINITE, load, *terms, (flow, -1.0))
    _total(model, row, (flow, hours), hours * float(most.sum()))


def _total(model: Model, row: EnergyRow, energy: tuple[Columns, float], most_mwh: float) -> None:
    lower, upper = (row.energy_mwh, INFINITE) if row.at_least else (-INFINITE, row.energy_mwh)
    if row.price is None:
        model.row(lower, upper, energy)
        return
    slack = model.columns(1, 0.0, max(row.energy_mwh, 0.0) if row.at_least else most_mwh + max(-row.energy_mwh, 0.0))
    model.earn(slack, -row.price)
    model.row(lower, upper, energy, (slack, 1.0 if row.at_least else -1.0))
