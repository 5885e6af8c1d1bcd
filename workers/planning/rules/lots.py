"""A meter that trades in lots has a whole number of them in every interval.

    sum of (d - c)[a,t] - L[t] = l * n[t],   n whole                                   (1)

l  size of a lot, MW; L  what loads draw there, MW
"""

import numpy as np

from workers.planning.instance import Meter
from workers.planning.model import Model
from workers.planning.rules.columns import FleetColumns


def add(model: Model, columns: FleetColumns, meter: Meter) -> None:
    """Add (1) for a meter with lots."""
    if meter.lot_mw is None:
        return
    most = least = -meter.load_mw
    for number in meter.units:
        unit = columns.instance.units[number]
        most, least = most + unit.most_out_mw, least - unit.most_in_mw
    lowest, highest = np.ceil(least / meter.lot_mw - 1e-9), np.floor(most / meter.lot_mw + 1e-9)
    whole = model.columns(len(most), lowest, highest, integer=True)
    model.rows(meter.load_mw, meter.load_mw, *columns.net(meter.units), (whole, -meter.lot_mw))
