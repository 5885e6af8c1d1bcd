"""What is stored bounds how much was delivered, and how much still can be: rows that cut off no schedule.

    0 <= n[t] - n[t-1] <= y[t]                                                         (1)
    lowest[t] <= n[t] <= highest[t]                                                    (2)
    s[a,t] <= p + q * n[t]     for each side of the upper hull of most[t+1, .]         (3)
    s[a,t] >= p + q * n[t]     for each side of the lower hull of least[t+1, .]        (4)

n            intervals delivered and credited until t, no more than are due; y  1 where an interval counts
s            energy in store, MWh; most, least  of `delivery.Deliveries`
lowest, highest  counts at which something can be stored that suffices for the rest

Any schedule that meets its hours can credit just as many as are due, so nothing is lost. Without these rows a store
that must deliver for nearly as long as it can has an LP relaxation up to a quarter above its best schedule, with them
mostly within a hundredth of it. Where there is plenty of energy they gain nothing and are left out.
"""

from collections.abc import Iterator
from itertools import pairwise

import numpy as np

from workers.planning.delivery import Deliveries, at_once
from workers.planning.model import INFINITE, Columns, Model
from workers.planning.rules.columns import StoreColumns
from workers.planning.store import whole_intervals
from workers.planning.units import Booleans, Floats

TIGHT = 0.6
"""The rows pay where a row asks for at least this share of what a store delivers that does so whenever it can."""

ROUND_OFF_MWH = 1e-7
"""The rows leave so much room: sums of energies are rounded, and a solver's rows hold within its tolerance."""

LEAST_KEPT = 0.5
"""A store that loses more than half of its energy in an interval has no use for these rows."""

MOST_STATES = 200_000
"""Intervals times counts beyond which the rows would outgrow the model."""


def is_worth_adding(deliveries: Deliveries) -> bool:
    """Tell whether a row asks for nearly as much as there would be if every interval delivered that could."""
    if deliveries.store.kept < LEAST_KEPT or deliveries.intervals * (deliveries.due + 1) > MOST_STATES:
        return False
    found = at_once(deliveries)
    dues = ((row, whole_intervals(row.due_hours, deliveries.hours)) for row in deliveries.rows)
    return any(due > 0 and due >= TIGHT * found.within(row) for row, due in dues)


def add(model: Model, columns: StoreColumns, deliveries: Deliveries, counted: Columns) -> None:
    """Add (1) to (4) for one store; `counted` are the columns y, T values, below 0 where nothing is asked.

    Adds nothing where no count will do: the other rules leave no schedule then.
    """
    most, least = deliveries.most_mwh, deliveries.least_mwh
    can_be = (most > -INFINITE) & (least < INFINITE) & (most >= least - ROUND_OFF_MWH)
    if not can_be.any(axis=1).all():
        return
    lowest, highest = can_be.argmax(axis=1), deliveries.due - can_be[:, ::-1].argmax(axis=1)
    credited = model.columns(len(lowest), lowest.astype(float), highest.astype(float))
    before, after, asked = credited[:-1], credited[1:], np.flatnonzero(counted >= 0)
    model.rows(0.0, np.where(counted >= 0, INFINITE, 0.0), (after, 1.0), (before, -1.0))
    model.rows(-INFINITE, 0.0, (after[asked], 1.0), (before[asked], -1.0), (counted[asked], -1.0))
    store = deliveries.store
    _hulls(model, columns.stored, after, [*_sides(most[1:], can_be[1:], store.ceiling_mwh)], 1.0)
    _hulls(model, columns.stored, after, [*_sides(-least[1:], can_be[1:], -store.floor_mwh)], -1.0)


def _hulls(
    model: Model, stored: Columns, credited: Columns, sides: list[tuple[int, float, float]], sign: float
) -> None:
    """Add (3), or with `sign` -1 (4); a side is an interval, a slope and the value at a count of none."""
    if sides:
        where = np.array([side[0] for side in sides])
        slopes, values = np.array([side[1] for side in sides]), np.array([side[2] for side in sides])
        model.rows(-INFINITE, values + ROUND_OFF_MWH, (stored[where], sign), (credited[where], -slopes))


def _sides(values: Floats, can_be: Booleans, limits: Floats) -> Iterator[tuple[int, float, float]]:
    """Give the sides of the upper hull of values by count, interval by interval, that lie below a limit somewhere."""
    for t, limit in enumerate(limits.tolist()):
        hull: list[tuple[int, float]] = []
        for count in np.flatnonzero(can_be[t]).tolist():
            point = (count, min(float(values[t, count]), limit))
            while len(hull) > 1 and _slope(hull[-2], hull[-1]) <= _slope(hull[-2], point):
                hull.pop()
            hull.append(point)
        if len(hull) == 1 and hull[0][1] < limit:
            yield t, 0.0, hull[0][1]
        for left, right in pairwise(hull):
            if min(left[1], right[1]) < limit:
                slope = _slope(left, right)
                yield t, slope, left[1] - slope * left[0]


def _slope(left: tuple[int, float], right: tuple[int, float]) -> float:
    return (right[1] - left[1]) / (right[0] - left[0])
