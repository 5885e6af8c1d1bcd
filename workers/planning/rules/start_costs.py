"""A start costs what the hours off before it say.

    margin -= sum over starts of C[k], k the last entry with A[k] <= hours off         (1)
    y[k,t] <= sum of w[t-n], A[k] <= n*h < A[k+1]   (and 1 where the window began within it)          (2)
    sum of y[k,t] <= v[t]                                                              (3)

A, C  hours off and cost of an entry, both ascending; y[k,t]  1 where a start at t is of kind k, all but the last

A start that no y claims is of the last, dearest kind. Tight: Morales-Espana, Latorre and Ramos, IEEE Transactions on
Power Systems 28, 2013 (from memory).
"""

from math import ceil, inf

import numpy as np

from workers.planning.model import INFINITE, Columns, Model
from workers.planning.rules.columns import GeneratorColumns


def add(model: Model, columns: GeneratorColumns, hours: float) -> None:
    """Add the start costs of one generator."""
    costs = columns.unit.start_costs
    if not costs:
        return
    dearest = costs[-1][1]
    model.earn(columns.starts, -dearest)
    if len(costs) == 1:
        return
    count = len(columns.starts)
    claimed = []
    for k, (after, cost) in enumerate(costs[:-1]):
        least, most = ceil(after / hours - 1e-9), ceil(costs[k + 1][0] / hours - 1e-9) - 1
        kind = model.columns(count, 0.0, 1.0)
        model.earn(kind, dearest - cost)
        _within(model, columns, kind, max(least, 1), most, hours)
        claimed.append((kind, 1.0))
    model.rows(-INFINITE, 0.0, *claimed, (columns.starts, -1.0))


def _within(model: Model, columns: GeneratorColumns, kind: Columns, least: int, most: int, hours: float) -> None:
    """Add (2): a start is of this kind only after a stop that many intervals before it."""
    off = columns.unit.hours_off
    for t in range(len(kind)):
        stops = columns.stops[max(0, t - most) : max(0, t - least + 1)]
        intervals_off = t + (off / hours if off != inf else inf)
        since_before = not columns.unit.was_on and least - 1e-9 <= intervals_off < most + 1 - 1e-9
        model.row(-INFINITE, float(since_before), (kind[t : t + 1], 1.0), (stops, -np.ones(len(stops))))
