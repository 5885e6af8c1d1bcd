"""Numbers and names as the contract limits them: power in MW, energy in MWh, money in the window's currency."""

from typing import Annotated, Any

from pydantic import Discriminator, Field, StringConstraints, Tag

from schemas.document import tag

LARGEST = 1e9
"""No size on this wire is larger: beyond it, a double no longer resolves what a meter does."""

MAX_INTERVALS = 3_000
MAX_ASSETS = 20_000
MAX_SITES = 2_000
MAX_ASSET_INTERVALS = 2_000_000
MAX_COMMITMENTS = 50_000
MAX_COMMITMENT_ROWS = 50_000
MAX_OUTAGES = 20_000
MAX_RESERVE_PRODUCTS = 16

Id = Annotated[str, StringConstraints(pattern=r"^[A-Za-z0-9][A-Za-z0-9._-]{0,63}$")]
Title = Annotated[str, StringConstraints(max_length=200)]
Text = Annotated[str, StringConstraints(max_length=2_000)]
Currency = Annotated[str, StringConstraints(pattern=r"^[A-Z]{3}$")]

Size = Annotated[float, Field(ge=0, le=LARGEST)]
PositiveSize = Annotated[float, Field(gt=0, le=LARGEST)]
LotSize = Annotated[float, Field(ge=1e-3, le=LARGEST)]
"""No lot is smaller than 1 kW: solvers drop coefficients too small to matter, and with them the rule."""

Signed = Annotated[float, Field(ge=-LARGEST, le=LARGEST)]
Fraction = Annotated[float, Field(ge=0, le=1)]
Efficiency = Annotated[float, Field(gt=0, le=1)]
LossPerHour = Annotated[float, Field(ge=0, lt=1)]
Percent = Annotated[float, Field(ge=0, le=102)]
Count = Annotated[int, Field(ge=0, le=1_000_000)]


def _number_or_series(value: Any) -> str:
    return tag("series") if isinstance(value, list) else tag("number")


_BranchByShape = Discriminator(_number_or_series)
# The first bad entry stands for the rest.
_Length = Field(min_length=1, max_length=MAX_INTERVALS, fail_fast=True)

SizeSeries = Annotated[
    Annotated[Size, Tag(tag("number"))] | Annotated[list[Size], _Length, Tag(tag("series"))],
    _BranchByShape,
]
"""A series of sizes: one number per interval, or one for all."""

SignedSeries = Annotated[
    Annotated[Signed, Tag(tag("number"))] | Annotated[list[Signed], _Length, Tag(tag("series"))],
    _BranchByShape,
]
"""A series of signed numbers (prices, positions): one per interval, or one for all."""
