"""At least so much reserve of a product in each interval.

    sum of held[a,p,t] + short[t]  >=  due[t]                                          (1)

held  reserve of the product, MW; short  missing, MW; a priced row pays for h*short, a binding one has none
"""

import numpy as np

from workers.planning.model import INFINITE, Model
from workers.planning.rows import HoldingRow
from workers.planning.rules.columns import FleetColumns


def add(model: Model, columns: FleetColumns, row: HoldingRow) -> None:
    """Add one row of a commitment."""
    where = np.array([t for t in row.intervals if row.due_mw[t] > 0], dtype=np.int64)
    if len(where) == 0:
        return
    due = row.due_mw[where]
    held = [columns.units[number].reserve.get(row.product) for number in row.units]
    terms = [(part[where], 1.0) for part in held if part is not None]
    short = model.columns(len(where), 0.0, 0.0 if row.price is None else due)
    if row.price is not None:
        model.earn(short, -columns.instance.hours * row.price)
    model.rows(due, INFINITE, *terms, (short, 1.0))
