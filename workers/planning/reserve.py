"""Reserve products in arrays: what a MW held earns, how long it must last, in which blocks it is constant."""

from dataclasses import dataclass
from datetime import datetime, time
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import NDArray

from schemas.calendar import Calendar
from schemas.window import Window
from workers.planning.units import Floats, series


@dataclass(frozen=True)
class Product:
    """A reserve product: T prices per MW and hour, `block` numbers the block of each interval."""

    id: str
    up: bool
    down: bool
    sustain_hours: float
    price_per_mw_per_hour: Floats
    block: NDArray[np.int64]


def products_of_window(window: Window, calendar: Calendar) -> tuple[Product, ...]:
    """Index the window's reserve products."""
    return tuple(
        Product(
            id=product.id,
            up=product.direction in {"up", "symmetric"},
            down=product.direction in {"down", "symmetric"},
            sustain_hours=product.sustain_minutes / 60,
            price_per_mw_per_hour=series(product.price_per_mw_per_hour, calendar.count),
            block=_blocks(calendar, product.block_hours),
        )
        for product in window.reserve_products
    )


def _blocks(calendar: Calendar, block_hours: float | None) -> NDArray[np.int64]:
    """Count off blocks from local midnight, in hours of absolute time; a cut block is a block of what is left."""
    if block_hours is None:
        return np.arange(calendar.count)
    zone = ZoneInfo(calendar.timezone)
    found: dict[tuple[object, int], int] = {}
    numbers = []
    for k, day in enumerate(calendar.days):
        midnight = datetime.combine(day, time(0), zone)
        since = (calendar.start + k * calendar.interval - midnight.astimezone(calendar.start.tzinfo)).total_seconds()
        place = (day, int(since / 3600 / block_hours + 1e-9))
        numbers.append(found.setdefault(place, len(found)))
    return np.array(numbers, dtype=np.int64)
