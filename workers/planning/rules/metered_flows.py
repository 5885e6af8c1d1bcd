"""What flows out of and into a meter, around a level, as two columns.

    sum of power[a,t] - L[t] - level[t] = x[t] - m[t],   x, m >= 0                   (1)
    x[t] <= X[t] * z[t],  m[t] <= M[t] * (1 - z[t])        where both at once would pay (2)

x,m  MW above and below the level; L  what loads draw; X,M  the most either can be; z  1 where above

(2) is needed only where a MW out earns more than a MW in costs: elsewhere the optimum never has both.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.planning.instance import Meter
from workers.planning.model import INFINITE, Columns, Model
from workers.planning.rules.columns import FleetColumns


@dataclass(frozen=True)
class Flows:
    """Columns above and below a level, T each, MW."""

    above: Columns
    below: Columns


def add(
    model: Model, columns: FleetColumns, meter: Meter, level: NDArray[np.float64], exclusive: NDArray[np.bool_]
) -> Flows:
    """Add (1), and (2) where `exclusive`."""
    count = len(level)
    most, least = -meter.load_mw - level, -meter.load_mw - level
    for number in meter.units:
        unit = columns.instance.units[number]
        most, least = most + unit.most_out_mw, least - unit.most_in_mw
    above = model.columns(count, 0.0, np.maximum(most, 0.0))
    below = model.columns(count, 0.0, np.maximum(-least, 0.0))
    drawn = meter.load_mw + level
    model.rows(drawn, drawn, *columns.net(meter.units), (above, -1.0), (below, 1.0))
    where = np.flatnonzero(exclusive & (most > 0) & (least < 0))
    if len(where):
        is_above = model.columns(len(where), 0.0, 1.0, integer=True)
        model.rows(-INFINITE, 0.0, (above[where], 1.0), (is_above, -most[where]))
        model.rows(-INFINITE, -least[where], (below[where], 1.0), (is_above, -least[where]))
    return Flows(above, below)
