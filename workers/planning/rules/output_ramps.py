"""Output changes by no more than its ramps; a run begins and ends within reach of them.

    P[t] - P[t-1] <= RU * u[t-1] + max(P_min, RU) * v[t]                               (1)
    P[t-1] - P[t] <= RD * u[t] + max(P_min, RD) * w[t]                                 (2)

RU, RD  ramps per interval, MW; the state before the window stands for t-1 = -1

Neither binds into an interval in which an outage lowers what the generator can do: a trip is a fact.
"""

import numpy as np

from workers.planning.model import INFINITE, Model
from workers.planning.rules.columns import GeneratorColumns


def add(model: Model, columns: GeneratorColumns) -> None:
    """Add the ramps of one generator; nothing without them."""
    generator, output, is_on = columns.unit, columns.output, columns.is_on
    later = np.flatnonzero(generator.ramp_binds[1:]) + 1
    first = slice(0, int(generator.ramp_binds[0]))
    before, was_on = generator.output_before_mw, float(generator.was_on)
    if (up := generator.ramp_up_mw) is not None:
        start = max(generator.min_output_mw, up)
        model.rows(-INFINITE, before + up * was_on, (output[first], 1.0), (columns.starts[first], -start))
        model.rows(
            -INFINITE,
            0.0,
            (output[later], 1.0),
            (output[later - 1], -1.0),
            (is_on[later - 1], -up),
            (columns.starts[later], -start),
        )
    if (down := generator.ramp_down_mw) is not None:
        stop = max(generator.min_output_mw, down)
        model.rows(-INFINITE, -before, (output[first], -1.0), (is_on[first], -down), (columns.stops[first], -stop))
        model.rows(
            -INFINITE,
            0.0,
            (output[later - 1], 1.0),
            (output[later], -1.0),
            (is_on[later], -down),
            (columns.stops[later], -stop),
        )
