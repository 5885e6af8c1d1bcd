"""Commitments: what was promised, over which assets, when (contract, section 5)."""

from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, Tag
from pydantic_core import PydanticCustomError

from schemas.document import Document, tag, tagged_by
from schemas.instants import Instant, WallTime
from schemas.quantities import LARGEST, MAX_ASSETS, Fraction, Id, Size, SizeSeries

Direction = Literal["discharge", "charge"]
ExcusedStretches = Annotated[list["Stretch"], Field(max_length=1_000)]
Members = Annotated[list[Id], Field(min_length=1, max_length=MAX_ASSETS, fail_fast=True)]


def _only_true(value: Any) -> Any:
    if value is not True:
        raise PydanticCustomError("not_true", "must be true")
    return value


# A literal alone compares, and takes 1 for true.
Always = Annotated[Literal[True], BeforeValidator(_only_true)]


class Stretch(Document):
    """A stretch of time on interval borders; `from` is included, `to` is not."""

    from_: Annotated[Instant, Field(alias="from")]
    to: Instant


class AppliesTo(Document):
    """Exactly one of: each of some assets on its own, or the net sum of a group, a site or the fleet."""

    assets: Members | None = None
    group: Members | None = None
    site: Id | None = None
    fleet: Always | None = None


class Threshold(Document):
    """A power to be reached: a fraction of rated power, or MW; exactly one."""

    fraction_of_rated: Annotated[float, Field(gt=0, le=1)] | None = None
    mw: Annotated[float, Field(gt=0, le=LARGEST)] | None = None


class CeilingThreshold(Document):
    """A power not to be exceeded: a fraction of rated power, or MW; exactly one."""

    fraction_of_rated: Fraction | None = None
    mw: Size | None = None


class Promise(Document):
    """What every commitment has: a name, whom it binds, and which intervals count."""

    id: Id
    applies_to: AppliesTo
    each_day: bool = False
    between: Annotated[list[WallTime], Field(min_length=2, max_length=2)] | None = None
    from_: Annotated[Instant | None, Field(alias="from")] = None
    to: Instant | None = None


class HoursAtLeast(Promise):
    """So many hours with power at or above the threshold."""

    kind: Literal["hours_at_least"]
    threshold: Threshold
    direction: Direction = "discharge"
    headroom_mw: Size = 0.0
    hours: Size
    min_block_hours: Size = 0.0
    excused: ExcusedStretches = []
    shortfall_price_per_hour: Size | None = None


class HoursAtMost(Promise):
    """At most so many hours with power above the threshold."""

    kind: Literal["hours_at_most"]
    threshold: CeilingThreshold
    direction: Direction = "discharge"
    headroom_mw: Size = 0.0
    hours: Size
    excused: ExcusedStretches = []
    shortfall_price_per_hour: Size | None = None


class FirmDelivery(Promise):
    """At least so much power in each interval; 0 where nothing is due."""

    kind: Literal["firm_delivery"]
    power_mw: SizeSeries
    direction: Direction = "discharge"
    excused: ExcusedStretches = []
    shortfall_price_per_mwh: Size | None = None


class EnergyAtLeast(Promise):
    """At least so much energy in one direction."""

    kind: Literal["energy_at_least"]
    energy_mwh: Size
    direction: Direction = "discharge"
    shortfall_price_per_mwh: Size | None = None


class EnergyAtMost(Promise):
    """At most so much energy in one direction."""

    kind: Literal["energy_at_most"]
    energy_mwh: Size
    direction: Direction = "discharge"
    shortfall_price_per_mwh: Size | None = None


class ReserveHolding(Promise):
    """At least so much reserve of a product held in each interval."""

    kind: Literal["reserve_holding"]
    product: Id
    power_mw: SizeSeries
    shortfall_price_per_mw_per_hour: Size | None = None


Commitment = Annotated[
    Annotated[HoursAtLeast, Tag(tag("hours_at_least"))]
    | Annotated[HoursAtMost, Tag(tag("hours_at_most"))]
    | Annotated[FirmDelivery, Tag(tag("firm_delivery"))]
    | Annotated[EnergyAtLeast, Tag(tag("energy_at_least"))]
    | Annotated[EnergyAtMost, Tag(tag("energy_at_most"))]
    | Annotated[ReserveHolding, Tag(tag("reserve_holding"))],
    tagged_by("kind"),
]
