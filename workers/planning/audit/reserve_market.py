"""Read the reserve products of a window: what they pay, and the blocks in which what is held does not change."""

from collections.abc import Sequence
from dataclasses import dataclass
from math import fsum

from schemas.window import ReserveProduct, Window
from workers.planning.audit.clock import Clock, whole_series


@dataclass(frozen=True)
class Offer:
    """One product, `place` in the window's list: its price per MW and hour in each interval.

    `blocks` hold the intervals in which what is held is constant; those of a single interval ask nothing and are left
    out.
    """

    place: int
    product: ReserveProduct
    price: list[float]
    blocks: list[list[int]]

    @property
    def is_up(self) -> bool:
        """Tell whether it asks for more power into the grid."""
        return self.product.direction != "down"

    @property
    def is_down(self) -> bool:
        """Tell whether it asks for less power into the grid."""
        return self.product.direction != "up"

    @property
    def sustained_hours(self) -> float:
        """Return for how long what is held must last once called, hours."""
        return self.product.sustain_minutes / 60


def read_offers(window: Window, clock: Clock) -> dict[str, Offer]:
    """Return the products by id; raise ValueError where a price has another length than the window."""
    offers = {}
    for place, product in enumerate(window.reserve_products):
        price = whole_series(product.price_per_mw_per_hour, clock.count, f"the price of {product.id}")
        blocks = [] if product.block_hours is None else clock.blocks(product.block_hours)
        offers[product.id] = Offer(place, product, price, [block for block in blocks if len(block) > 1])
    return offers


def up_offers(offers: dict[str, Offer]) -> list[Offer]:
    """List the products that ask for more power into the grid, symmetric ones among them."""
    return [offer for offer in offers.values() if offer.is_up]


def down_offers(offers: dict[str, Offer]) -> list[Offer]:
    """List the products that ask for less power into the grid, symmetric ones among them."""
    return [offer for offer in offers.values() if offer.is_down]


def total_mw(rows: Sequence[Sequence[float]]) -> list[float] | None:
    """Return the sum of some series per interval, MW; None where there are none."""
    if not rows:
        return None
    return list(rows[0]) if len(rows) == 1 else [fsum(column) for column in zip(*rows, strict=True)]
