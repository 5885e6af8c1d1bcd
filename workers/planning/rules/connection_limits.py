"""Net power stays within the connection, at every site and for the fleet.

    -I[m,t]  <=  sum of (d - c)[a,t] over the meter's stores - L[m,t]  <=  X[m,t]      (1)

X,I  export and import limit, MW; L  what fixed and standby loads draw there, MW
"""

import numpy as np

from workers.planning.instance import Meter
from workers.planning.model import Model
from workers.planning.rules.columns import FleetColumns


def add(model: Model, columns: FleetColumns, meter: Meter) -> None:
    """Add (1) in the intervals in which the meter has a limit that its stores and loads can reach."""
    terms = columns.net(meter.stores)
    limited = np.isfinite(meter.export_limit_mw) | np.isfinite(meter.import_limit_mw)
    where = np.flatnonzero(limited)
    if len(where) == 0:
        return
    lower, upper = meter.load_mw - meter.import_limit_mw, meter.load_mw + meter.export_limit_mw
    if not terms:
        nothing = model.columns(len(where), 0.0, 0.0)
        model.rows(lower[where], upper[where], (nothing, 1.0))
        return
    model.rows(lower[where], upper[where], *((part[where], factor) for part, factor in terms))
