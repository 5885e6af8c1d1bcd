"""The market window: when, in which steps, at which prices (contract, section 4)."""

from typing import Annotated, Literal

from pydantic import Field

from schemas.document import Document
from schemas.instants import Instant, IntervalLength, ZoneName
from schemas.quantities import MAX_RESERVE_PRODUCTS, Currency, Id, SignedSeries


class ReserveProduct(Document):
    """Power kept ready for the grid's operator, paid per MW and hour held."""

    id: Id
    direction: Literal["up", "down", "symmetric"]
    sustain_minutes: Annotated[float, Field(ge=0, le=1440)]
    block_hours: Annotated[float, Field(gt=0, le=24)] | None = None
    price_per_mw_per_hour: SignedSeries


class Window(Document):
    """Equal intervals from `start`, as many as the price arrays have entries; prices may be negative."""

    start: Instant
    interval: IntervalLength
    timezone: ZoneName
    currency: Currency
    price_per_mwh: SignedSeries | None = None
    buy_price_per_mwh: SignedSeries | None = None
    sell_price_per_mwh: SignedSeries | None = None
    price_basis: Literal["forecast", "published"]
    settled_at: Literal["site", "fleet"] = "site"
    reserve_products: Annotated[list[ReserveProduct], Field(max_length=MAX_RESERVE_PRODUCTS)] = []

    @property
    def interval_hours(self) -> float:
        """Length of an interval in hours."""
        return self.interval.total_seconds() / 3600

    @property
    def intervals(self) -> int:
        """Number of intervals: the length of the longest price array; 0 when no price is an array."""
        prices = (self.price_per_mwh, self.buy_price_per_mwh, self.sell_price_per_mwh)
        return max((len(price) for price in prices if isinstance(price, list)), default=0)
