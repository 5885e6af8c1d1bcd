"""What the service keeps, as the web side sees it: jobs with their requests and answers, fleets and windows.

`service.store.jobs.RedisJobStore` and `service.store.documents.RedisDocumentStore` are the real ones; tests of the web
side may use others that keep these promises. Every method may raise `StoreUnreachable`.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any, Literal, Protocol

from schemas.document import Answer
from schemas.instants import Instant
from schemas.job import Job
from schemas.records import AnswerKind, JobRecord, JobState, Reference

DocumentKind = Literal["fleet", "window"]

LONGEST_WAIT_SECONDS = 30.0


class StoreError(Exception):
    """Something that the store has to say instead of what was asked of it."""


class StoreUnreachable(StoreError):  # noqa: N818 - a state, told to the caller as 503
    """Redis does not answer."""


class StoreFull(StoreError):  # noqa: N818 - a state, told to the caller as 503
    """Nothing more is taken for now; `why` says what is full, `retry_after_seconds` when to come back."""

    def __init__(self, why: str, retry_after_seconds: int) -> None:
        super().__init__(why, retry_after_seconds)
        self.why = why
        self.retry_after_seconds = retry_after_seconds


class NoSuchJob(StoreError):  # noqa: N818 - what a caller asked for, not a fault
    """No job has this id."""


class JobForgotten(StoreError):  # noqa: N818 - what a caller asked for, not a fault
    """There was a job with this id; it was deleted or has expired."""


class AlreadyEnded(StoreError):  # noqa: N818 - a state
    """The job is finished or failed and cannot be cancelled; `record` is the job."""

    def __init__(self, record: JobRecord) -> None:
        super().__init__(record)
        self.record = record


class StillLive(StoreError):  # noqa: N818 - a state
    """The job has not ended and cannot be deleted; `record` is the job."""

    def __init__(self, record: JobRecord) -> None:
        super().__init__(record)
        self.record = record


class NoAnswer(StoreError):  # noqa: N818 - a state
    """The job has no answer of the kind asked for; `record` says how it stands."""

    def __init__(self, record: JobRecord) -> None:
        super().__init__(record)
        self.record = record


class NoSuchAsset(StoreError):  # noqa: N818 - what a caller asked for, not a fault
    """The schedule holds no asset of these ids."""

    def __init__(self, asset_ids: Sequence[str]) -> None:
        super().__init__(tuple(asset_ids))
        self.asset_ids = tuple(asset_ids)


class BadCursor(StoreError):  # noqa: N818 - the caller's
    """The cursor was not made by this list."""


class KeyReused(StoreError):  # noqa: N818 - the caller's
    """The idempotency key was used for another payload."""


class NoSuchDocument(StoreError):  # noqa: N818 - what a caller asked for, not a fault
    """No document of this id, or no such revision of it, is stored."""


class PreconditionFailed(StoreError):  # noqa: N818 - the caller's
    """The stored document is not in the state that the caller named; `current_etag` is None where none is stored."""

    def __init__(self, current_etag: str | None) -> None:
        super().__init__(current_etag)
        self.current_etag = current_etag


@dataclass(frozen=True)
class IdempotencyKey:
    """A caller's key with where it counts, and the SHA-256 of the payload in its parsed canonical form."""

    scope: str
    key: str
    fingerprint: str


@dataclass(frozen=True)
class Accepted:
    """A job that passed every check.

    `job` is the resolved request, fleet and window inline; `resolved` its JSON as `schemas.reading.canonical` writes
    it, kept and given back byte by byte.
    """

    job: Job
    resolved: bytes
    submitted_by: str | None = None
    fleet: Reference | None = None
    window: Reference | None = None


@dataclass(frozen=True)
class Submission:
    """What became of a submission: the job, and whether an earlier one with the same key already stood for it."""

    record: JobRecord
    replayed: bool = False


@dataclass(frozen=True)
class JobPage:
    """Jobs, newest first, and the cursor of the next page; None: there is none."""

    jobs: list[JobRecord]
    next: str | None


@dataclass(frozen=True)
class ScheduleParts:
    """A schedule document without `assets`, and the assets one by one, each read when it is asked for."""

    head: dict[str, Any]
    assets: Iterator[dict[str, Any]]


@dataclass(frozen=True)
class WorkerSeen:
    """A worker process that has been heard of in the last 17 seconds."""

    name: str
    queue: str
    is_busy: bool


@dataclass(frozen=True)
class Health:
    """What the store knows of those who work for it."""

    redis_version: str
    keeper_seen: bool
    workers: list[WorkerSeen] = field(default_factory=list)
    queued: dict[str, int] = field(default_factory=dict)
    memory_share: float | None = None


class JobStore(Protocol):
    """Jobs, their requests and their answers."""

    def recall(self, key: IdempotencyKey) -> Submission | None:
        """Give the job that a submission with this key became, None if there was none.

        To be asked before a body is checked: documents that it names may have changed since. Raises KeyReused, and
        JobForgotten where that job is gone.
        """

    def submit(self, accepted: Accepted, key: IdempotencyKey | None = None) -> Submission:
        """Write the record and put the job into its queue; raises StoreFull, KeyReused, JobForgotten.

        Record, request and key are written in one step: of concurrent submissions with one key one becomes the job,
        the others are answered with it.
        """

    def job(self, job_id: str) -> JobRecord:
        """Read a job; raises NoSuchJob, JobForgotten (as everything below that takes a job's id)."""

    def jobs(
        self, *, state: JobState | None = None, label: str | None = None, limit: int = 20, cursor: str | None = None
    ) -> JobPage:
        """List jobs, newest first; a page may be short although another follows. Raises BadCursor."""

    def wait(self, job_id: str, seconds: float) -> JobRecord:
        """Give the job when it has ended, or as it is when the time is over, 30 s at most."""

    def cancel(self, job_id: str, *, keep_best: bool = False) -> JobRecord:
        """Ask a job to end; `keep_best` hands over what is in hand. Raises AlreadyEnded if it finished or failed."""

    def delete(self, job_id: str) -> None:
        """Forget an ended job; raises StillLive."""

    def request(self, job_id: str) -> bytes:
        """Give the resolved request as JSON."""

    def answer_kind(self, job_id: str) -> AnswerKind | None:
        """Tell what kind of answer the job has; None as long as, or where, it has none."""

    def schedule(self, job_id: str, asset_ids: Sequence[str] | None = None) -> ScheduleParts:
        """Give the schedule, narrowed to these assets in its own order; raises NoAnswer, NoSuchAsset."""

    def diagnosis(self, job_id: str) -> dict[str, Any]:
        """Give the diagnosis, or what an undecided job knows; raises NoAnswer."""

    def ping(self) -> None:
        """Return if Redis answers."""

    def health(self) -> Health:
        """Tell who is at work."""


class Revision(Answer):
    """One write of a stored document."""

    number: int
    written_at: Instant
    written_by: str | None = None
    note: str | None = None
    sha256: str

    @property
    def etag(self) -> str:
        """Give the strong entity tag of the document in this revision, with its quotes."""
        return f'"{self.number}-{self.sha256[:16]}"'


@dataclass(frozen=True)
class Stored:
    """A document in one of its revisions; `text` is the JSON it was stored as."""

    id: str
    revision: Revision
    text: bytes


@dataclass(frozen=True)
class DocumentPage:
    """Ids of stored documents in order, each with its latest revision, and the cursor of the next page."""

    documents: list[tuple[str, Revision]]
    next: str | None


@dataclass(frozen=True)
class RevisionPage:
    """Revisions of a document, newest first, and the cursor of the next page."""

    revisions: list[Revision]
    next: str | None


@dataclass(frozen=True)
class Condition:
    """What must hold for a write: the current entity tag is one of `any_of` (`*`: any), or nothing is stored yet."""

    any_of: frozenset[str] | None = None
    must_be_new: bool = False


UNCONDITIONAL = Condition()


class DocumentStore(Protocol):
    """Fleets and windows, each write a revision."""

    def put(
        self,
        kind: DocumentKind,
        document_id: str,
        text: bytes,
        *,
        note: str | None = None,
        written_by: str | None = None,
        condition: Condition = UNCONDITIONAL,
    ) -> Revision:
        """Store a document as its next revision; raises PreconditionFailed, StoreFull.

        `number` is 1 for a document that was never there; numbers are not given twice, not even after a removal.
        """

    def get(self, kind: DocumentKind, document_id: str, revision: int | None = None) -> Stored:
        """Read a document, the latest revision unless another is named; raises NoSuchDocument."""

    def remove(self, kind: DocumentKind, document_id: str, condition: Condition = UNCONDITIONAL) -> None:
        """Remove a document with all its revisions; raises NoSuchDocument, PreconditionFailed."""

    def documents(self, kind: DocumentKind, *, limit: int = 20, cursor: str | None = None) -> DocumentPage:
        """List what is stored, by id; raises BadCursor."""

    def revisions(
        self, kind: DocumentKind, document_id: str, *, limit: int = 20, cursor: str | None = None
    ) -> RevisionPage:
        """List the revisions of a document, newest first; raises NoSuchDocument, BadCursor."""
