"""A job: today's question about a fleet and a window (contract, section 5)."""

from collections.abc import Mapping, Set
from typing import Annotated, Any, Literal

from pydantic import Discriminator, Field, Tag, model_validator

from schemas.commitments import Commitment
from schemas.document import Document, tag, tagged_by
from schemas.fleet import Fleet
from schemas.instants import Instant
from schemas.keyed import ByAsset, ByCommitment, ByMeter, ByProduct, BySite
from schemas.quantities import (
    LARGEST,
    MAX_ASSETS,
    MAX_COMMITMENTS,
    MAX_INTERVALS,
    MAX_OUTAGES,
    Count,
    Fraction,
    Id,
    Percent,
    Signed,
    SignedSeries,
    Size,
    SizeSeries,
    Text,
    Title,
)
from schemas.schedule import AssetSchedule, Schedule
from schemas.window import Window

Lever = Literal["commitments", "targets", "planned_outages", "initial_energy", "limits"]
Method = Literal["auto", "per_asset", "milp", "cp_sat", "coordinated"]
ListOfPowers = Annotated[list[Signed], Field(max_length=MAX_INTERVALS, fail_fast=True)]
ListOfTruths = Annotated[list[bool], Field(max_length=MAX_INTERVALS, fail_fast=True)]


class Initial(Document):
    """The state of an asset at the window's start, and of the interval before it."""

    stored_mwh: Size | None = None
    state_of_charge_percent: Percent | None = None
    power_mw: Signed | None = None
    hours_in_state: Size | None = None
    on: bool | None = None
    output_mw: Size | None = None


class Target(Document):
    """What a store should hold at the end: a minimum, and a price for what lies above it."""

    final_stored_mwh: Size | None = None
    final_value_per_mwh: Size | None = None


class EnergyNeed(Document):
    """Energy a flexible load must draw within a stretch of time."""

    energy_mwh: Size
    from_: Annotated[Instant | None, Field(alias="from")] = None
    to: Instant | None = None


class Outage(Document):
    """A time in which an asset can do less; `to` absent: until further notice."""

    asset: Id
    kind: Literal["planned", "forced"]
    from_: Annotated[Instant, Field(alias="from")]
    to: Instant | None = None
    available_fraction: Fraction | None = None
    available_charge_fraction: Fraction | None = None
    available_discharge_fraction: Fraction | None = None


class TodaysLimits(Document):
    """Limits of a site or of the fleet for this window, in place of the fleet's own."""

    export_limit_mw: SizeSeries | None = None
    import_limit_mw: SizeSeries | None = None


class AssetCount(Document):
    """What the window's first day already holds for an asset."""

    discharged_mwh: Size = 0.0
    starts: Count = 0


class SiteCount(Document):
    """What the month already holds for a site."""

    peak_import_mw: Size = 0.0


def _amount_or_by_asset(value: Any) -> str:
    return tag("by-asset") if isinstance(value, Mapping) else tag("amount")


CountedAmount = Annotated[
    Annotated[Size, Tag(tag("amount"))] | Annotated[ByAsset[Size], Tag(tag("by-asset"))],
    Discriminator(_amount_or_by_asset),
]


class CountedBefore(Document):
    """What counts already: towards first rows, the first day's cycles and starts, the month's peak."""

    commitments: ByCommitment[CountedAmount] = {}
    assets: ByAsset[AssetCount] = {}
    sites: BySite[SiteCount] = {}


class Callback(Document):
    """Where to tell that the job has ended."""

    url: Annotated[str, Field(pattern=r"^https?://[^\s]+$", max_length=2_000)]


class ScheduleAsset(Document):
    """Decisions for one asset, as `check` takes them; what else a schedule document says of it is recomputed."""

    id: Id
    power_mw: SignedSeries
    on: ListOfTruths | None = None
    reserve_mw: ByProduct[SizeSeries] | None = None

    @model_validator(mode="before")
    @classmethod
    def _only_decisions_count(cls, value: Any) -> Any:
        return _without(value, AssetSchedule.model_fields.keys() - cls.model_fields.keys())


class ScheduleToCheck(Document):
    """A schedule to be replayed: bare decisions, or a whole schedule document."""

    assets: Annotated[list[ScheduleAsset], Field(max_length=MAX_ASSETS)]

    @model_validator(mode="before")
    @classmethod
    def _only_decisions_count(cls, value: Any) -> Any:
        return _without(value, Schedule.model_fields.keys() - cls.model_fields.keys())


def _without(value: Any, names: Set[str]) -> Any:
    return {name: member for name, member in value.items() if name not in names} if isinstance(value, dict) else value


class Actuals(Document):
    """What was metered before `until`, and the stored energy then."""

    until: Instant
    power_mw: ListOfPowers
    stored_mwh: Size | None = None
    on: ListOfTruths | None = None


class Question(Document):
    """What every task is given: a fleet, today's state of it, and what was promised."""

    label: Title | None = None
    note: Text | None = None
    fleet: Fleet | None = None
    fleet_id: Id | None = None
    initial: ByAsset[Initial] = {}
    missing_initial: Literal["refuse", "assume_middle", "hold_out"] = "refuse"
    initial_from_job_id: Id | None = None
    targets: ByAsset[Target] = {}
    forecasts: ByAsset[SizeSeries] = {}
    energy_needs: ByAsset[Annotated[list[EnergyNeed], Field(max_length=1_000)]] = {}
    positions: ByMeter[SignedSeries] = {}
    outages: Annotated[list[Outage], Field(max_length=MAX_OUTAGES)] = []
    limits: ByMeter[TodaysLimits] = {}
    counted_before: CountedBefore = CountedBefore()
    commitments: Annotated[list[Commitment], Field(max_length=MAX_COMMITMENTS)] = []
    method: Method = "auto"
    time_limit_seconds: Annotated[float, Field(ge=1, le=3600)] = 60.0
    needed_by: Instant | None = None
    urgent: bool = False
    relative_gap: Annotated[float, Field(ge=1e-7, le=0.1)] = 0.0005
    absolute_gap: Annotated[float, Field(ge=0, le=LARGEST)] = 0.0
    seed: Annotated[int, Field(ge=0, le=2**31 - 1)] = 0
    explain_commitments: bool = False
    levers: Annotated[list[Lever], Field(max_length=5)] = ["commitments", "targets", "planned_outages"]
    callback: Callback | None = None


class OneWindow(Question):
    """A question about a single window."""

    window: Window | None = None
    window_id: Id | None = None


class ScheduleJob(OneWindow):
    """Plan the best schedule."""

    task: Literal["schedule"] = "schedule"


class CheckJob(OneWindow):
    """Replay a schedule that is already there; nothing is solved."""

    task: Literal["check"]
    schedule: ScheduleToCheck


class CommitmentCostsJob(OneWindow):
    """Price each further hour of one commitment."""

    task: Literal["commitment_costs"]
    commitment: Id
    step_hours: Annotated[float, Field(gt=0, le=LARGEST)] = 1.0


class RescheduleJob(OneWindow):
    """Plan again within the day, from what was metered and what was decided."""

    task: Literal["reschedule"]
    previous_job_id: Id
    actuals: ByAsset[Actuals] = {}
    locked_until: Instant | None = None
    deviation_price_per_mwh: Size = 0.0


def _window_or_id(value: Any) -> str:
    return tag("id") if isinstance(value, str) else tag("window")


WindowOrId = Annotated[
    Annotated[Window, Tag(tag("window"))] | Annotated[Id, Tag(tag("id"))], Discriminator(_window_or_id)
]


class SequenceJob(Question):
    """Plan windows that follow one another as one horizon."""

    task: Literal["sequence"]
    windows: Annotated[list[WindowOrId], Field(min_length=1, max_length=100)]


Job = Annotated[
    Annotated[ScheduleJob, Tag(tag("schedule"))]
    | Annotated[CheckJob, Tag(tag("check"))]
    | Annotated[CommitmentCostsJob, Tag(tag("commitment_costs"))]
    | Annotated[RescheduleJob, Tag(tag("reschedule"))]
    | Annotated[SequenceJob, Tag(tag("sequence"))],
    tagged_by("task", default="schedule"),
]
