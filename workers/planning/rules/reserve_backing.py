"""Reserve held by a store could be delivered: by its power, and by what is in it at both ends of the interval.

    (d - c)[t] + up[t] <= D[t],    (d - c)[t] - down[t] >= -C[t]                       (1)
    sum of up[p,t] * m[p] / eta_d  <=  s[t-1] - floor[t],  s[t] - floor[t]             (2)
    sum of down[p,t] * m[p] * eta_c  <=  ceiling[t] - s[t-1],  ceiling[t] - s[t]       (3)

m  hours that a product must last; floor, ceiling  limits of stored energy in the interval, MWh
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
    first = limit[0] - sign * columns.unit.initial_mwh
    model.rows(-INFINITE, first, *((held[:1], factor) for held, factor in lasting))
    if count > 1:
        later = np.arange(1, count)
        shifted = ((held[later], factor) for held, factor in lasting)
        model.rows(-INFINITE, limit[1:], *shifted, (stored[:-1], sign))
