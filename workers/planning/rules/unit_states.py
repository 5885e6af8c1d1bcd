"""A generator starts, runs and stops; it stays up and down for its least times.

    u[t] - u[t-1] = v[t] - w[t]                                                        (1)
    v[t] <= u[t],  w[t] <= 1 - u[t]                                                    (2)
    sum of v[k], k = t-UT+1 .. t  <=  u[t]                                             (3)
    sum of w[k], k = t-DT+1 .. t  <=  1 - u[t]                                         (4)

u  1 where it is on; v, w  1 where it starts, stops; UT, DT  least up and down times, intervals

(3) and (4) are the turn-on and turn-off inequalities of Rajan and Takriti, IBM Research Report RC23628, 2005: with (1)
they describe the convex hull, and imply (2). A trip, where less than the minimum output is left, ends a run: (3) asks
nothing there, and starts before it no longer bind after it. The state before the window holds the first intervals.
"""

import numpy as np

from workers.planning.model import INFINITE, Model
from workers.planning.rules.columns import GeneratorColumns


def add(model: Model, columns: GeneratorColumns) -> None:
    """Add on, starts and stops of one generator with its least times."""
    generator, is_on, starts, stops = columns.unit, columns.is_on, columns.starts, columns.stops
    before = float(generator.was_on)
    model.rows(before, before, (is_on[:1], 1.0), (starts[:1], -1.0), (stops[:1], 1.0))
    if len(is_on) > 1:
        model.rows(0.0, 0.0, (is_on[1:], 1.0), (is_on[:-1], -1.0), (starts[1:], -1.0), (stops[1:], 1.0))
    last_trip = -1
    for t, possible in enumerate(generator.can_run.tolist()):
        now = is_on[t : t + 1]
        down = stops[max(0, t - generator.min_down + 1) : t + 1]
        model.row(-INFINITE, 1.0, (down, 1.0), (now, 1.0))
        if not possible:
            last_trip = t
            continue
        up = starts[max(0, t - generator.min_up + 1, last_trip + 1) : t + 1]
        model.row(-INFINITE, 0.0, (up, 1.0), (now, -1.0))
    _hold_state_before(model, columns)


def _hold_state_before(model: Model, columns: GeneratorColumns) -> None:
    """Let a run or a rest that began before the window last: (3) and (4) for what lies before it."""
    generator = columns.unit
    held = min(generator.held_intervals, len(columns.is_on))
    if generator.was_on:
        tripped = np.flatnonzero(~generator.can_run[:held])
        held = int(tripped[0]) if len(tripped) else held
    if held > 0:
        state = float(generator.was_on)
        model.rows(state, state, (columns.is_on[:held], 1.0))
