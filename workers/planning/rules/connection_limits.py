"""Net power stays within the connection, at every site and for the fleet, with the reserve that may be called.

    sum of power[a,t] + sum of up[a,t] - L[m,t]    <=  X[m,t] + over[m,t]              (1)
    sum of power[a,t] - sum of down[a,t] - L[m,t]  >=  -I[m,t] - over[m,t]             (2)

X,I  export and import limit, MW; L  what fixed and standby loads draw there, MW; up,down  reserve held behind the meter
over  power beyond the limit, MW; 0, unless a diagnosis looks for the nearest schedule and prices it

Where both limits are 0 the meter is an island: its reserve serves its own load and is not counted.
"""

import numpy as np

from workers.planning.instance import Meter
from workers.planning.model import INFINITE, Model
from workers.planning.rules.columns import FleetColumns, Net
from workers.planning.units import Floats


def add(model: Model, columns: FleetColumns, meter: Meter) -> None:
    """Add (1) and (2) in the intervals in which the meter has a limit."""
    lower, upper = meter.load_mw - meter.import_limit_mw, meter.load_mw + meter.export_limit_mw
    net = columns.net(meter.units)
    up, down = columns.held(meter.units, up=True), columns.held(meter.units, up=False)
    with_up, with_down = ~meter.is_islanded & bool(up), ~meter.is_islanded & bool(down)
    beyond: Net = []
    below: Net = []
    if meter.excess_price is not None and meter.is_limited:
        over = model.columns(len(upper), 0.0, INFINITE)
        model.earn(over, -meter.excess_price * columns.instance.hours)
        beyond, below = [(over, -1.0)], [(over, 1.0)]
    nothing = np.full_like(upper, INFINITE)
    _rows(model, [*net, *up, *beyond], -nothing, np.where(with_up, upper, INFINITE))
    held = [(held, -1.0) for held, _ in down]
    _rows(model, [*net, *held, *below], np.where(with_down, lower, -INFINITE), nothing)
    lower, upper = np.where(with_down, -INFINITE, lower), np.where(with_up, INFINITE, upper)
    if not beyond:
        _rows(model, net, lower, upper)
        return
    _rows(model, [*net, *beyond], -nothing, upper)
    _rows(model, [*net, *below], lower, nothing)


def _rows(model: Model, terms: Net, lower: Floats, upper: Floats) -> None:
    """Add the rows that limit anything."""
    where = np.flatnonzero(np.isfinite(lower) | np.isfinite(upper))
    if len(where) == 0:
        return
    if not terms:
        nothing = model.columns(len(where), 0.0, 0.0)
        model.rows(lower[where], upper[where], (nothing, 1.0))
        return
    model.rows(lower[where], upper[where], *((part[where], factor) for part, factor in terms))
