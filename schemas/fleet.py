"""The fleet: what stands on the ground (contract, section 3)."""

from typing import Annotated, Literal

from pydantic import Field, Tag

from schemas.document import Document, tag, tagged_by
from schemas.quantities import (
    MAX_ASSETS,
    MAX_RESERVE_PRODUCTS,
    MAX_SITES,
    Count,
    Efficiency,
    Id,
    LossPerHour,
    LotSize,
    PositiveSize,
    Size,
    Text,
    Title,
)

ProductNames = Annotated[list[Id], Field(max_length=MAX_RESERVE_PRODUCTS)]


class Site(Document):
    """A grid connection with one meter; a limit that is absent is unlimited."""

    id: Id
    export_limit_mw: Size | None = None
    import_limit_mw: Size | None = None
    lot_mw: LotSize | None = None
    peak_import_charge_per_mw: Size = 0.0
    import_fee_per_mwh: Size = 0.0
    export_fee_per_mwh: Size = 0.0


class Storage(Document):
    """A store; powers are at its terminals, energies inside it, `standby_load_mw` is drawn at the meter."""

    id: Id
    kind: Literal["storage"]
    site: Id | None = None
    discharge_limit_mw: Size
    charge_limit_mw: Size
    min_discharge_mw: Size = 0.0
    min_charge_mw: Size = 0.0
    energy_capacity_mwh: PositiveSize
    min_stored_mwh: Size = 0.0
    max_stored_mwh: Size | None = None
    charge_efficiency: Efficiency
    discharge_efficiency: Efficiency
    self_discharge_per_hour: LossPerHour = 0.0
    standby_load_mw: Size = 0.0
    wear_cost_per_mwh: Size = 0.0
    max_cycles_per_day: Size | None = None
    ramp_mw_per_hour: Size | None = None
    min_run_hours: Size = 0.0
    min_rest_hours: Size = 0.0
    max_starts_per_day: Count | None = None
    reserve_products: ProductNames | None = None


class GeneratorCost(Document):
    """Cost of running: `constant + linear*P + quadratic*P^2` per hour, P in MW."""

    constant_per_hour: Size = 0.0
    linear_per_mwh: Size = 0.0
    quadratic_per_mw2h: Size = 0.0


class StartCost(Document):
    """Cost of a start after at least so many hours off."""

    after_hours_off: Size
    cost: Size


class Generator(Document):
    """A plant that is on between its minimum and maximum output, or off."""

    id: Id
    kind: Literal["generator"]
    site: Id | None = None
    min_output_mw: Size = 0.0
    max_output_mw: Size
    cost: GeneratorCost = GeneratorCost()
    start_costs: Annotated[list[StartCost], Field(max_length=50)] = []
    min_up_hours: Size = 0.0
    min_down_hours: Size = 0.0
    ramp_up_mw_per_hour: Size | None = None
    ramp_down_mw_per_hour: Size | None = None
    reserve_products: ProductNames | None = None


class Renewable(Document):
    """Wind or sun: up to its forecast, or exactly that when it cannot be curtailed."""

    id: Id
    kind: Literal["renewable"]
    site: Id | None = None
    curtailable: bool = True
    cost_per_mwh: Size = 0.0


class FlexibleLoad(Document):
    """A load whose energy is fixed for a stretch of time, its timing is not."""

    id: Id
    kind: Literal["flexible_load"]
    site: Id | None = None
    draw_limit_mw: Size
    min_draw_mw: Size = 0.0
    interruptible: bool = True


class FixedLoad(Document):
    """A load that draws its forecast."""

    id: Id
    kind: Literal["fixed_load"]
    site: Id | None = None


Asset = Annotated[
    Annotated[Storage, Tag(tag("storage"))]
    | Annotated[Generator, Tag(tag("generator"))]
    | Annotated[Renewable, Tag(tag("renewable"))]
    | Annotated[FlexibleLoad, Tag(tag("flexible_load"))]
    | Annotated[FixedLoad, Tag(tag("fixed_load"))],
    tagged_by("kind"),
]


class Fleet(Document):
    """Sites and assets under the operator's own limits."""

    name: Title | None = None
    note: Text | None = None
    export_limit_mw: Size | None = None
    import_limit_mw: Size | None = None
    lot_mw: LotSize | None = None
    sites: Annotated[list[Site], Field(max_length=MAX_SITES)] = []
    assets: Annotated[list[Asset], Field(min_length=1, max_length=MAX_ASSETS)]
