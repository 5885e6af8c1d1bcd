"""The answer to a question that cannot be met: why, how far, and the way out (contract, section 7)."""

from typing import Annotated, Any, Literal

from pydantic import Field

from schemas.document import Answer
from schemas.schedule import Assumption, Schedule


class Member(Answer):
    """One element of a conflict, as a pointer into the resolved request and in words."""

    pointer: str
    text: str


class Conflict(Answer):
    """Elements that cannot hold together with physics; irreducible when none of them can be spared."""

    irreducible: bool
    members: list[Member]


class Attainable(Answer):
    """The most hours a row can reach, the other commitments held."""

    commitment: str
    asset: str | None = None
    day: str | None = None
    required_hours: float
    attainable_hours: float
    left_out: list[str] = []


class Change(Answer):
    """What a repair changes."""

    lever: str
    from_: Annotated[float | str, Field(alias="from")]
    to: float | str
    unit: str


class Repair(Answer):
    """A change that was solved and found to make the job feasible."""

    text: str
    change: Change
    patch: list[dict[str, Any]]
    verified: bool
    margin: float
    margin_bound: float


class Diagnosis(Answer):
    """Why a job is infeasible, proven."""

    job_id: str | None = None
    outcome: Literal["infeasible"] = "infeasible"
    complete: bool
    summary: str
    conflicts: list[Conflict]
    attainable: list[Attainable] = []
    repairs: list[Repair] = []
    nearest_schedule: Schedule | None = None
    assumptions: list[Assumption] = []
    cautions: list[str]
