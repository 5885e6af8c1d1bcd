"""The answer to a question that cannot be met: why, how far, and the way out (contract, section 7)."""

from typing import Annotated, Any, Literal

from pydantic import Field

from schemas.document import Answer
from schemas.job import Lever
from schemas.schedule import Assumption, CommitmentCost, Schedule


class Member(Answer):
    """One element of a conflict, as a pointer into the resolved request and in words; a row also by asset and day."""

    pointer: str
    text: str
    asset: str | None = None
    day: str | None = None


class Conflict(Answer):
    """Elements that cannot hold together with physics; irreducible when none of them can be spared."""

    irreducible: bool
    members: list[Member]


class Attainable(Answer):
    """The most (for `*_at_most` the least) that a row can reach, the rest held; the figures carry the kind's own unit.

    `left_out` are pointers of what cannot be met whatever this row asks, and was left out for this figure.
    """

    commitment: str
    asset: str | None = None
    day: str | None = None
    required_hours: float | None = None
    attainable_hours: float | None = None
    required_mwh: float | None = None
    attainable_mwh: float | None = None
    required_mw_hours: float | None = None
    attainable_mw_hours: float | None = None
    left_out: list[str] = []


class Change(Answer):
    """One thing a repair changes: where, by which lever, from what to what; `unit` is that of both."""

    lever: Lever
    pointer: str
    from_: Annotated[float | str, Field(alias="from")]
    to: float | str
    unit: str


class Repair(Answer):
    """A change that was solved and found to make the job feasible; `change` is the first of `changes`."""

    text: str
    change: Change
    changes: list[Change]
    patch: list[dict[str, Any]]
    verified: bool
    margin: float
    margin_bound: float


class Shortfall(Answer):
    """What a nearest schedule misses of a row, a target or a limit, in the unit given."""

    pointer: str
    text: str
    asset: str | None = None
    day: str | None = None
    amount: float
    unit: str


class NearestSchedule(Schedule):
    """A schedule that meets all but what its shortfalls list, with the least of them in total, and audited so."""

    shortfalls: list[Shortfall]


class Diagnosis(Answer):
    """Why a job is infeasible, proven."""

    job_id: str | None = None
    outcome: Literal["infeasible"] = "infeasible"
    complete: bool
    summary: str
    conflicts: list[Conflict]
    attainable: list[Attainable] = []
    repairs: list[Repair] = []
    nearest_schedule: NearestSchedule | None = None
    no_nearest_schedule: str | None = Field(default=None, description="Why there is no nearest schedule.")
    cut_off: list[str] = Field(default=[], description="What time did not suffice for, or the audit refused.")
    commitment_costs: list[CommitmentCost] | None = None
    assumptions: list[Assumption] = []
    cautions: list[str]
