"""The answer to a question that can be met (contract, section 6)."""

from typing import Literal

from pydantic import Field

from schemas.document import Answer
from schemas.instants import Instant, IntervalLength

Outcome = Literal["optimal", "feasible", "infeasible", "undecided", "violated"]


class Totals(Answer):
    """Money of a whole schedule, in the window's currency; costs are positive."""

    sales: float = 0.0
    purchases: float = 0.0
    reserve_income: float = 0.0
    wear_cost: float = 0.0
    fuel_cost: float = 0.0
    start_cost: float = 0.0
    fees: float = 0.0
    peak_import_charge: float = 0.0
    shortfall_cost: float = 0.0
    deviation_cost: float = 0.0
    final_energy_value: float = 0.0


class AssetTotals(Answer):
    """Money that belongs to an asset."""

    reserve_income: float = 0.0
    wear_cost: float = 0.0
    fuel_cost: float = 0.0
    start_cost: float = 0.0
    final_energy_value: float = 0.0


class MeterTotals(Answer):
    """Money that belongs to a meter."""

    sales: float = 0.0
    purchases: float = 0.0
    fees: float = 0.0
    peak_import_charge: float = 0.0


class AssetSchedule(Answer):
    """Set points of one asset: mean power per interval (positive into the grid), stored energy at interval ends."""

    id: str
    power_mw: list[float]
    stored_mwh: list[float] | None = None
    on: list[bool] | None = None
    reserve_mw: dict[str, list[float]] = {}
    totals: AssetTotals = AssetTotals()


class MeterSchedule(Answer):
    """Power at one meter: a site, or an asset without a site."""

    id: str
    power_mw: list[float]
    totals: MeterTotals = MeterTotals()


class FleetSchedule(Answer):
    """Power of the whole fleet as one meter would read it."""

    power_mw: list[float]
    totals: MeterTotals = MeterTotals()


class MarginForgone(Answer):
    """What the margin would gain if a row were dropped, as the interval the bounds justify."""

    at_least: float
    at_most: float


class CommitmentResult(Answer):
    """One row of a commitment: what was asked, what is delivered; the figures carry the kind's own unit."""

    id: str
    asset: str | None = None
    day: str | None = None
    required_hours: float | None = None
    delivered_hours: float | None = None
    required_mwh: float | None = None
    delivered_mwh: float | None = None
    required_mw_hours: float | None = None
    delivered_mw_hours: float | None = None
    met: bool
    margin_forgone: MarginForgone | None = None


class CommitmentCost(Answer):
    """What so many hours of a commitment cost: the margin with them, its proven bound, what is lost against none."""

    hours: float
    margin: float
    margin_bound: float | None
    cost: float


class Violation(Answer):
    """A rule that a schedule breaks, by how much, where and when."""

    rule: str
    pointer: str
    asset: str | None = None
    site: str | None = None
    interval_start: Instant | None = None
    amount: float
    unit: str
    text: str


class Verification(Answer):
    """What the audit looked at, and the largest breach of a rule it found tolerable."""

    checks: int
    violations: list[Violation] = []
    largest_residual: float


class Assumption(Answer):
    """Something taken as read, and where in the request it belongs."""

    pointer: str
    text: str


class Provenance(Answer):
    """Where an answer comes from."""

    request_sha256: str
    versions: dict[str, str]
    seed: int
    threads: int
    why_method: str
    solver_seconds: float
    build_seconds: float = 0.0


class Schedule(Answer):
    """One schedule per asset, its money, its proof. Advisory: see `cautions`."""

    job_id: str | None = None
    outcome: Outcome
    method: str | None
    currency: str
    price_basis: str
    margin: float
    margin_bound: float | None
    relative_gap: float | None
    start: Instant
    interval: IntervalLength
    timezone: str
    interval_starts: list[Instant]
    totals: Totals
    assets: list[AssetSchedule]
    sites: list[MeterSchedule]
    fleet: FleetSchedule
    commitments: list[CommitmentResult]
    assumptions: list[Assumption] = []
    verification: Verification
    provenance: Provenance
    commitment_costs: list[CommitmentCost] | None = None
    cut_off: list[str] = Field(default=[], description="What was asked for and time did not suffice for.")
    cautions: list[str]


class Undecided(Answer):
    """Time ran out with neither a schedule nor a proof that there is none."""

    job_id: str | None = None
    outcome: Literal["undecided"] = "undecided"
    summary: str
    margin_bound: float | None
    best_attempt: Schedule | None = Field(description="Does not meet the request: its violations say where.")
    assumptions: list[Assumption] = []
    cautions: list[str]
