"""At least so many hours with power at or above a threshold.

    sign * (sum of power[a,t] - L[t])  >=  theta * y[t] - M[t] * (1 - y[t])          (1)
    sum of h*y[t] over the row + shortfall  >=  hours due                              (2)
    b[t] >= y[t] - y[t-1],  sum of b[k], k = t-B+1 .. t  <=  y[t]                      (3)

y      1 where the interval is counted; theta  threshold plus headroom, MW; sign  +1 discharge, -1 charge
L      what loads of a group, site or fleet draw; M  the most that can flow the other way, MW
b      1 where a counted block begins; B  its least length, intervals; no block begins where B do not fit

An excused interval counts whatever the power: (1) is dropped there. For a single store (1) is split into its two
powers, d >= theta*y and c <= C*(1 - y), which is tighter. (3) is the turn-on inequality of Rajan and Takriti 2005.
A priced row pays for its shortfall; a binding one has none.
"""

from itertools import pairwise

import numpy as np

from workers.planning.model import INFINITE, Columns, Model
from workers.planning.rows import HoursRow, most_against, most_power
from workers.planning.rules.columns import FleetColumns, StoreColumns
from workers.planning.store import whole_intervals
from workers.planning.units import Booleans


def add(model: Model, columns: FleetColumns, row: HoursRow) -> Columns:
    """Add one row of a commitment; give its columns y, in the order of its intervals."""
    hours = columns.instance.hours
    where = np.array(row.intervals, dtype=np.int64)
    excused = np.isin(where, list(row.excused))
    counted = model.binaries(excused | _within_reach(columns, row)[where])
    asked = np.flatnonzero(~excused)
    only = columns.units[row.units[0]] if row.asset is not None and row.units else None
    if isinstance(only, StoreColumns):
        _one_store(model, only, row, counted[asked], where[asked])
    elif row.units:
        _net_sum(model, columns, row, counted[asked], where[asked])
    if row.min_block > 1:
        _blocks(model, row, counted, where)
    if row.price is None:
        model.row(whole_intervals(row.due_hours, hours), INFINITE, (counted, 1.0))
        return counted
    shortfall = model.columns(1, 0.0, max(row.due_hours, 0.0))
    model.earn(shortfall, -row.price)
    model.row(row.due_hours, INFINITE, (counted, hours), (shortfall, 1.0))
    return counted


def _within_reach(columns: FleetColumns, row: HoursRow) -> Booleans:
    """Find the intervals in which the members' limits allow the threshold at all."""
    reachable: Booleans = most_power(columns.instance.units, row) >= row.threshold_mw - 1e-6
    return reachable


def _one_store(model: Model, store: StoreColumns, row: HoursRow, counted: Columns, where: Columns) -> None:
    forward, backward = (store.discharge, store.charge) if row.sign > 0 else (store.charge, store.discharge)
    other = store.unit.charge_limit_mw if row.sign > 0 else store.unit.discharge_limit_mw
    model.rows(0.0, INFINITE, (forward[where], 1.0), (counted, -row.threshold_mw))
    model.rows(-INFINITE, other[where], (backward[where], 1.0), (counted, other[where]))


def _net_sum(model: Model, columns: FleetColumns, row: HoursRow, counted: Columns, where: Columns) -> None:
    backward = most_against(columns.instance.units, row)[where]
    span = np.maximum(row.threshold_mw + backward, 0.0)
    terms = [(part[where], row.sign * factor) for part, factor in columns.net(row.units)]
    lower = row.threshold_mw - span + row.sign * row.load_mw[where]
    model.rows(lower, INFINITE, *terms, (counted, -span))


def _blocks(model: Model, row: HoursRow, counted: Columns, where: Columns) -> None:
    """Add (3) within each unbroken stretch of the row's intervals."""
    borders = [0, *(k + 1 for k, (left, right) in enumerate(pairwise(where)) if right != left + 1), len(where)]
    for first, end in pairwise(borders):
        members = counted[first:end]
        fits = np.arange(end - first) + row.min_block <= end - first
        begins = model.columns(end - first, 0.0, fits.astype(float))
        model.rows(0.0, INFINITE, (begins[:1], 1.0), (members[:1], -1.0))
        model.rows(0.0, INFINITE, (begins[1:], 1.0), (members[1:], -1.0), (members[:-1], 1.0))
        for t in range(end - first):
            window = begins[max(0, t - row.min_block + 1) : t + 1]
            model.row(-INFINITE, 0.0, (window, 1.0), (members[t : t + 1], -1.0))
