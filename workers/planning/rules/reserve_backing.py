"""Reserve held by a store could be delivered: by its power, and by what is in it at both ends of the interval.

    (d - c)[t] + up[t] <= D[t],    (d - c)[t] - down[t] >= -C[t]                       (1)
    sum of up[p,t] * m[p] / eta_d  <=  s[t-1] - floor[t],  s[t] - floor[t]             (2)
    sum of down[p,t] * m[p] * eta_c  <=  ceiling[t] - s[t-1],  ceiling[t] - s[t]       (3)

m  hours that a product must last; floor, ceiling  limits of stored energy in the interval, MWh

A store that starts above its ceiling and leaks has a ceiling that falls: where what it starts an interval with may
lie above the interval's ceiling, (3) asks for no down-reserve rather than for less than none.
"""

import numpy as np

from workers.planning.model import INFINITE, Columns, Model
from workers.planning.reserve import Product
from workers.planning.rules.columns import StoreColumns
from workers.planning.rules.output_limits import reserve_terms
from workers.planning.units import Floats


def add(model: Model, columns: StoreColumns, products: tuple[Product, ...]) -> None:
    """Back the reserve of one store."""
    if not columns.reserve:
        return
    store = columns.unit
    net = columns.net
    up, down = reserve_terms(columns.reserve, products, up=True), reserve_terms(columns.reserve, products, up=False)
    if up:
        model.rows(-INFINITE, store.discharge_limit_mw, *net, *up)
        lasting = _lasting(columns, products, 1 / store.discharge_efficiency, up=True)
        _at_both_ends(model, columns, [(held, factor) for held, factor in lasting], -1.0, -store.floor_mwh)
    if down:
        model.rows(-store.charge_limit_mw, INFINITE, *net, *((held, -1.0) for held, _ in down))
        lasting = _lasting(columns, products, store.charge_efficiency, up=False)
        _at_both_ends(model, columns, lasting, 1.0, store.ceiling_mwh)


def _lasting(
    columns: StoreColumns, products: tuple[Product, ...], efficiency: float, *, up: bool
) -> list[tuple[Columns, float]]:
    return [
        (held, products[number].sustain_hours * efficiency)
        for number, held in columns.reserve.items()
        if (products[number].up if up else products[number].down)
    ]


def _at_both_ends(
    model: Model, columns: StoreColumns, lasting: list[tuple[Columns, float]], sign: float, limit: Floats
) -> None:
    """Add sum of lasting + sign * stored <= limit, with the energy at the end and at the start of each interval."""
    stored, count = columns.stored, len(columns.stored)
    model.rows(-INFINITE, limit, *lasting, (stored, sign))
    at_first = [(held[:1], factor) for held, factor in lasting]
    if columns.opening is None:
        model.rows(-INFINITE, max(limit[0] - sign * columns.unit.initial_mwh, 0.0), *at_first)
    else:
        model.rows(-INFINITE, limit[0], *at_first, (columns.opening, sign))
    falling = np.flatnonzero(sign * (limit[1:] - limit[:-1]) < 0) + 1
    steady = np.setdiff1d(np.arange(1, count), falling)
    if len(steady):
        shifted = ((held[steady], factor) for held, factor in lasting)
        model.rows(-INFINITE, limit[steady], *shifted, (stored[steady - 1], sign))
    if len(falling):
        _where_the_limit_falls(model, columns, lasting, sign, limit, falling)


def _where_the_limit_falls(
    model: Model,
    columns: StoreColumns,
    lasting: list[tuple[Columns, float]],
    sign: float,
    limit: Floats,
    where: Columns,
) -> None:
    """Let the start of an interval lie beyond its limit, with nothing held then."""
    over = np.abs(limit[where] - limit[where - 1])
    most = columns.unit.ceiling_mwh[where] - columns.unit.floor_mwh[where] + over
    within = model.columns(len(where), 0.0, 1.0, integer=True)
    shifted = [(held[where], factor) for held, factor in lasting]
    model.rows(-INFINITE, limit[where] + over, *shifted, (columns.stored[where - 1], sign), (within, over))
    model.rows(-INFINITE, 0.0, *shifted, (within, -most))
