"""A flexible load draws each need's energy within it, nothing outside.

    sum of h*c[t] over the need  =  E                                                  (1)
    C_min * z[t] <= c[t] <= C[t] * z[t]                                                (2)
    b[t] >= z[t] - z[t-1],  sum of b[t] over the need <= 1      unless interruptible   (3)

c  draw, MW; z  1 where it draws; b  1 where a stretch of drawing begins
"""

import numpy as np

from workers.planning.model import INFINITE, Model
from workers.planning.rules.columns import FlexibleLoadColumns


def add(model: Model, columns: FlexibleLoadColumns, hours: float) -> None:
    """Add the needs of one flexible load."""
    load, draw, drawing = columns.unit, columns.draw, columns.drawing
    for need in load.needs:
        within = np.array(need.intervals, dtype=np.int64)
        model.row(need.energy_mwh, need.energy_mwh, (draw[within], hours))
    if drawing is None:
        return
    model.rows(-INFINITE, 0.0, (draw, 1.0), (drawing, -load.limit_mw))
    model.rows(0.0, INFINITE, (draw, 1.0), (drawing, -load.min_draw_mw))
    if load.interruptible:
        return
    for need in load.needs:
        members = drawing[need.intervals.start : need.intervals.stop]
        if len(members) == 0:
            continue
        begins = model.columns(len(members), 0.0, 1.0)
        model.rows(0.0, INFINITE, (begins[:1], 1.0), (members[:1], -1.0))
        model.rows(0.0, INFINITE, (begins[1:], 1.0), (members[1:], -1.0), (members[:-1], 1.0))
        model.row(-INFINITE, 1.0, (begins, 1.0))
