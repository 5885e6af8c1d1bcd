"""Runs last, rests last, and a day has only so many starts.

A run is a stretch with power in one direction; a change of direction starts a new one.

    v[t] >= u[t] - u[t-1],  v[t] <= u[t]                      in each direction        (1)
    sum of v[k], k = t-UT+1 .. t  <=  u[t]                    in each direction        (2)
    sum of (vd + vc)[k], k = t+1 .. t+R  <=  1 - ud[t] - uc[t]                         (3)
    sum of (vd + vc)[k] over a day  <=  starts left that day                           (4)

u  1 where the store runs in a direction (ud discharging, uc charging); v  1 where such a run begins
UT least run, R least rest, intervals

(2) is the turn-on inequality of Rajan and Takriti, IBM Research Report RC23628, 2005: with (1) it describes the
convex hull of the minimum run. A run cut by an outage that leaves less than the minimum power has ended: (2) asks
nothing there, and starts before it no longer bind after it. (3) is the same for rests. The state before the window
holds the first intervals.
"""

import numpy as np
from numpy.typing import NDArray

from workers.planning.model import INFINITE, Columns, Model
from workers.planning.rules.columns import States, StoreColumns
from workers.planning.store import Store


def add(model: Model, columns: StoreColumns) -> None:
    """Add runs, rests and starts of one store; nothing for a store without on-off columns."""
    store, states = columns.unit, columns.states
    asks_nothing = store.min_run <= 1 and store.min_rest == 0 and not store.start_allowances
    if states is None or (asks_nothing and store.held_intervals == 0):
        return
    begins_d = _starts(model, states.discharging, store.can_discharge, was_on=store.direction_before > 0)
    begins_c = _starts(model, states.charging, store.can_charge, was_on=store.direction_before < 0)
    _least_run(model, states.discharging, begins_d, store.can_discharge, store.min_run)
    _least_run(model, states.charging, begins_c, store.can_charge, store.min_run)
    if store.min_rest > 0:
        _least_rest(model, store, states, begins_d, begins_c)
    _hold_state_before(model, store, states)
    for allowance in store.start_allowances:
        day = np.array(allowance.intervals)
        model.row(-INFINITE, allowance.amount, (begins_d[day], 1.0), (begins_c[day], 1.0))


def _starts(model: Model, is_on: Columns, possible: NDArray[np.bool_], *, was_on: bool) -> Columns:
    begins = model.columns(len(is_on), 0.0, possible.astype(float))
    model.rows(-float(was_on), INFINITE, (begins[:1], 1.0), (is_on[:1], -1.0))
    model.rows(-INFINITE, 0.0, (begins, 1.0), (is_on, -1.0))
    if was_on:
        model.rows(0.0, 0.0, (begins[:1], 1.0))
    if len(is_on) > 1:
        model.rows(0.0, INFINITE, (begins[1:], 1.0), (is_on[1:], -1.0), (is_on[:-1], 1.0))
        model.rows(-INFINITE, 1.0, (begins[1:], 1.0), (is_on[:-1], 1.0))
    return begins


def _least_run(model: Model, is_on: Columns, begins: Columns, possible: NDArray[np.bool_], least: int) -> None:
    if least <= 1:
        return
    last_trip = -1
    for t in range(len(is_on)):
        if not possible[t]:
            last_trip = t
            continue
        first = max(0, t - least + 1, last_trip + 1)
        model.row(-INFINITE, 0.0, (begins[first : t + 1], 1.0), (is_on[t : t + 1], -1.0))


def _least_rest(model: Model, store: Store, states: States, begins_d: Columns, begins_c: Columns) -> None:
    for t in range(len(begins_d) - 1):
        later, now = slice(t + 1, t + 1 + store.min_rest), slice(t, t + 1)
        model.row(
            -INFINITE,
            1.0,
            (begins_d[later], 1.0),
            (begins_c[later], 1.0),
            (states.discharging[now], 1.0),
            (states.charging[now], 1.0),
        )
    if store.direction_before != 0:
        # (3) for the interval before the window, in which the store ran: no start while it would have to rest
        model.rows(0.0, 0.0, (begins_d[: store.min_rest], 1.0))
        model.rows(0.0, 0.0, (begins_c[: store.min_rest], 1.0))


def _hold_state_before(model: Model, store: Store, states: States) -> None:
    """Let a run or rest that began before the window last: (2) and (3) for starts that lie before it."""
    held = min(store.held_intervals, len(states.discharging))
    if held == 0:
        return
    if store.direction_before == 0:
        model.rows(0.0, 0.0, (states.discharging[:held], 1.0))
        model.rows(0.0, 0.0, (states.charging[:held], 1.0))
        return
    forward = store.direction_before > 0
    running, possible = (states.discharging, store.can_discharge) if forward else (states.charging, store.can_charge)
    tripped = np.flatnonzero(~possible[:held])
    until = int(tripped[0]) if len(tripped) else held
    if until > 0:
        model.rows(1.0, 1.0, (running[:until], 1.0))
