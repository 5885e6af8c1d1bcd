"""The record of a job: the truth that the service and the workers share, and where it lies in Redis.

A record is a Redis hash with text fields, one for each member of `JobRecord` that is not None; times are milliseconds
since 1970 by Redis's own clock. The queue carries only the name of a *carrier*: the job's id, and how often the job has
been put into the queue.
"""

from collections.abc import Iterable, Mapping
from datetime import UTC, datetime
from typing import Any, Literal

from pydantic import Field

from schemas.document import Answer
from schemas.instants import Instant
from schemas.schedule import Outcome

JobState = Literal["queued", "running", "cancelling", "finished", "failed", "cancelled"]
AnswerKind = Literal["schedule", "diagnosis", "undecided"]
Stop = Literal["cancel", "keep_best"]
FailureReason = Literal["worker-lost", "out-of-memory", "time-limit-ignored", "planning-fault", "service-fault"]

LIVE_STATES: frozenset[JobState] = frozenset({"queued", "running", "cancelling"})
ENDED_STATES: frozenset[JobState] = frozenset({"finished", "failed", "cancelled"})

QUEUE, URGENT_QUEUE = "jobs", "urgent"
QUEUES = (QUEUE, URGENT_QUEUE)
TASK = "workers.tasks.run"
"""The name by which a job is enqueued: the service imports no worker."""

TRIES = 3
"""How many workers a job may outlive: each crash costs one try, a return on request none."""

COMPRESSION = 1
"""zlib level of requests and answers: four fifths smaller in a fifth of the time that level 6 takes."""


class Reference(Answer):
    """A stored document in the revision that a job was accepted with."""

    id: str
    revision: int


class Progress(Answer):
    """How far a plan has come: its phase, the share of it that is done, and what is in hand."""

    phase: str | None = None
    done: float | None = None
    margin: float | None = None
    margin_bound: float | None = None
    relative_gap: float | None = None


class Failure(Answer):
    """Why a job failed: a stable word, and what happened; never a stack trace."""

    reason: FailureReason
    detail: str


class JobRecord(Answer):
    """A job as callers read it, without its links; what follows `error` is ours and not written out."""

    id: str
    task: str
    label: str | None = None
    note: str | None = None
    submitted_by: str | None = None
    state: JobState
    outcome: Outcome | None = None
    method: str
    progress: Progress = Progress()
    queue_position: int | None = Field(default=None, description="Jobs ahead of this one and itself; only while queued")
    attempt: int = 0
    created_at: Instant
    started_at: Instant | None = None
    finished_at: Instant | None = None
    expires_at: Instant | None = None
    request_sha256: str
    fleet: Reference | None = None
    window: Reference | None = None
    error: Failure | None = None

    answer: AnswerKind | None = Field(default=None, exclude=True)
    urgent: bool = Field(default=False, exclude=True)
    time_limit_seconds: float = Field(default=60.0, exclude=True)
    retention_seconds: float = Field(default=7 * 86_400.0, exclude=True)
    carrier: int = Field(default=1, exclude=True)
    tries_left: int = Field(default=TRIES, exclude=True)
    cancel: Stop | None = Field(default=None, exclude=True)
    evidence: str | None = Field(default=None, exclude=True, description="How the last worker on it died, if seen")

    @property
    def is_live(self) -> bool:
        """Tell whether the job has not ended."""
        return self.state in LIVE_STATES

    @property
    def queue(self) -> str:
        """Name the queue that carries the job."""
        return URGENT_QUEUE if self.urgent else QUEUE


_TIMES = ("created_at", "started_at", "finished_at", "expires_at")
_PROGRESS = tuple(Progress.model_fields)
_REFERENCES = ("fleet", "window")


def fields_of(record: JobRecord) -> dict[str, str]:
    """Write a record as the fields of a Redis hash; `queue_position` is counted, not kept."""
    document = record.model_dump(exclude_none=True, exclude={"queue_position"})
    hidden = {name for name, field in JobRecord.model_fields.items() if field.exclude}
    document |= {name: getattr(record, name) for name in hidden if getattr(record, name) is not None}
    document |= document.pop("progress", {})
    document |= {name: round(getattr(record, name).timestamp() * 1000) for name in _TIMES if name in document}
    for name in _REFERENCES:
        if reference := document.pop(name, None):
            document |= {f"{name}_id": reference["id"], f"{name}_revision": reference["revision"]}
    if error := document.pop("error", None):
        document |= {"error_reason": error["reason"], "error_detail": error["detail"]}
    return {name: str(int(value)) if isinstance(value, bool) else str(value) for name, value in document.items()}


def record_of(fields: Mapping[str, str]) -> JobRecord:
    """Read a record from the fields of its Redis hash; an empty field is an absent one."""
    document: dict[str, Any] = {name: text for name, text in fields.items() if text != ""}
    document |= {name: instant_of(int(document[name])) for name in _TIMES if name in document}
    document["progress"] = {name: document.pop(name) for name in _PROGRESS if name in document}
    for name in _REFERENCES:
        if (known := document.pop(f"{name}_id", None)) is not None:
            document[name] = {"id": known, "revision": document.pop(f"{name}_revision")}
    if (reason := document.pop("error_reason", None)) is not None:
        document["error"] = {"reason": reason, "detail": document.pop("error_detail", "")}
    return JobRecord.model_validate({name: value for name, value in document.items() if name in JobRecord.model_fields})


def carrier_options(job_id: str, carrier: int) -> dict[str, Any]:
    """Say how a carrier is put into its queue: once, kept until it is taken, without a result, a retry or a time limit.

    Time is kept by the record's own limit; an alarm of the queue's could only interrupt the handing over.
    """
    name = carrier_name(job_id, carrier)
    return {
        "job_id": name,
        "unique": True,
        "description": name,
        "job_timeout": -1,
        "result_ttl": 0,
        "failure_ttl": 3600,
    }


def carrier_name(job_id: str, carrier: int) -> str:
    """Name the entry of the queue that carries a job for the nth time.

    A new name for each time: what a worker that was taken for dead still does to its own entry cannot touch the next.
    """
    return f"{job_id}-{carrier}"


def carried_job(name: str) -> str:
    """Give the id of the job that a carrier stands for."""
    return name.rpartition("-")[0]


def instant_of(milliseconds: float) -> datetime:
    """Read Redis's clock, milliseconds since 1970, as an instant in UTC."""
    return datetime.fromtimestamp(milliseconds / 1000, UTC)


class Keys:
    """Names of the Redis keys of one deployment, all under its prefix."""

    def __init__(self, prefix: str) -> None:
        self.prefix = prefix
        self.by_time = f"{prefix}:jobs:by-time"
        self.waiting = f"{prefix}:carriers:waiting"
        self.started = f"{prefix}:carriers:started"
        self.expiring = f"{prefix}:jobs:expiring"
        self.keeper = f"{prefix}:keeper"

    def job(self, job_id: str) -> str:
        """Name the hash of a job's record."""
        return f"{self.prefix}:job:{job_id}"

    def request(self, job_id: str) -> str:
        """Name the resolved request, compressed."""
        return f"{self.prefix}:job:{job_id}:request"

    def answer(self, job_id: str) -> str:
        """Name the hash of the answer: `head`, and a chunk for each asset under its position, all compressed."""
        return f"{self.prefix}:job:{job_id}:answer"

    def gone(self, job_id: str) -> str:
        """Name what is left of a job that was deleted or has expired."""
        return f"{self.prefix}:job:{job_id}:gone"

    def answer_of_attempt(self, job_id: str, attempt: int) -> str:
        """Name the answer that one attempt is writing; it becomes the job's when the attempt is let through."""
        return f"{self.prefix}:job:{job_id}:answer:{attempt}"

    def ended(self, job_id: str) -> str:
        """Name the channel on which the end of a job is told."""
        return f"{self.prefix}:job:{job_id}:ended"

    def idempotency(self, scope_and_key: str) -> str:
        """Name what is remembered of a submission that carried an idempotency key."""
        return f"{self.prefix}:idempotency:{scope_and_key}"

    def document(self, kind: str, document_id: str) -> str:
        """Name the hash of what is known of a stored document's revisions."""
        return f"{self.prefix}:{kind}:{document_id}"

    def document_texts(self, kind: str, document_id: str) -> str:
        """Name the hash of a stored document's texts by revision, compressed."""
        return f"{self.prefix}:{kind}:{document_id}:texts"

    def document_counter(self, kind: str, document_id: str) -> str:
        """Name the number of a document's last revision; it outlives the document, so that none is given twice."""
        return f"{self.prefix}:{kind}:{document_id}:counter"

    def documents(self, kind: str) -> str:
        """Name the sorted set of the ids of stored documents of a kind."""
        return f"{self.prefix}:{kind}s"

    def all_of_job(self, job_id: str) -> Iterable[str]:
        """Name every key that holds something of a job, but not that it is gone."""
        return (self.job(job_id), self.request(job_id), self.answer(job_id))


DEFAULT_PREFIX = "hourwright"


def rq_prefix(key_prefix: str) -> str:
    """Give the prefix of the queue's own keys; a deployment with a prefix of its own needs one there too."""
    return "rq" if key_prefix == DEFAULT_PREFIX else f"{key_prefix}:rq"
