"""A start costs what the hours off before it say.

    margin -= sum over starts of C[k], k the last entry with A[k] <= hours off         (1)
    y[k,t] <= sum of w[t-n], A[k] <= n*h < A[k+1]   (and 1 where the window began within it)          (2)
    sum of y[k,t] <= v[t]                                                              (3)

A, C  hours off and cost of an entry, both ascending; y[k,t]  1 where a start at t is of kind k, all but the last

A start that no y claims is of the last, dearest kind. Tight: Morales-Espana, Latorre and Ramos, IEEE Transactions on
Power Systems 28, 2013 (from memory).
"""

from math import ceil

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
        kind = model.columns(count, 0.0, 1.0)
        model.earn(kind, dearest - cost)
        _within(model, columns, kind, (after, costs[k + 1][0]), hours)
        claimed.append((kind, 1.0))
    model.rows(-INFINITE, 0.0, *claimed, (columns.starts, -1.0))


def _within(
    model: Model, columns: GeneratorColumns, kind: Columns, hours_off: tuple[float, float], hours: float
) -> None:
    """Add (2): a start is of this kind only where it comes that many hours, from and up to, after a stop.

    The hours off before the window need not be whole intervals, nor as many as one.
    """
    after, until = hours_off
    least, most = max(ceil(after / hours - 1e-9), 1), ceil(until / hours - 1e-9) - 1
    for t in range(len(kind)):
        stops = columns.stops[max(0, t - most) : max(0, t - least + 1)]
        since_before = not columns.unit.was_on and after - 1e-9 <= t * hours + columns.unit.hours_off < until - 1e-9
        model.row(-INFINITE, float(since_before), (kind[t : t + 1], 1.0), (stops, -np.ones(len(stops))))
