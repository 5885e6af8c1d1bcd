"""The answers that exist on the HTTP side only, and the one body that does: models for building and describing them."""

from typing import Any, Literal

from pydantic import Field

from schemas.document import Answer, Document
from schemas.instants import Instant
from schemas.records import JobRecord
from schemas.schedule import Assumption


class CancelRequest(Document):
    """How a job is to end: at once and without an answer, or with the best schedule in hand."""

    keep_best: bool = False


class JobLinks(Answer):
    """Where to go from a job; null where there is nothing to be had."""

    self: str
    request: str
    schedule: str | None
    diagnosis: str | None
    report: str | None
    events: str | None
    cancel: str | None


class JobDocument(JobRecord):
    """A job: how far it is, how it ended, and where its parts are."""

    links: JobLinks


class JobList(Answer):
    """Jobs, newest first; `next` is the cursor of the next page."""

    jobs: list[JobDocument]
    next: str | None


class Size(Answer):
    """How much there is to plan."""

    assets: int
    sites: int
    intervals: int
    asset_intervals: int
    commitment_rows: int
    outages: int


class Validation(Answer):
    """What a submission would be told: that it is valid, what is taken as read, and what to beware of."""

    valid: Literal[True] = True
    assumptions: list[Assumption]
    cautions: list[str]
    size: Size


class DocumentLinks(Answer):
    """Where a stored document is, and how it came to be."""

    self: str
    revision: str
    revisions: str


class RevisionDocument(Answer):
    """One write of a stored document: when, by whom, and with what note; `etag` is for `If-Match`."""

    id: str
    revision: int
    written_at: Instant
    written_by: str | None
    note: str | None
    sha256: str
    etag: str
    links: DocumentLinks


class FleetList(Answer):
    """Stored fleets by id, each with its latest revision; `next` is the cursor of the next page."""

    fleets: list[RevisionDocument]
    next: str | None


class WindowList(Answer):
    """Stored windows by id, each with its latest revision; `next` is the cursor of the next page."""

    windows: list[RevisionDocument]
    next: str | None


class RevisionList(Answer):
    """Revisions of a stored document, newest first; `next` is the cursor of the next page."""

    revisions: list[RevisionDocument]
    next: str | None


class ContractVersion(Answer):
    """A version of the contract, and the request fields that came with it."""

    version: str
    request_fields_added: list[str]


class NotYet(Answer):
    """What of the contract is refused by name for now."""

    tasks: list[str]
    methods: list[str]


class VersionDocument(Answer):
    """Which versions answer here."""

    name: str
    version: str
    contract: str
    contract_versions: list[ContractVersion]
    not_yet: NotYet
    libraries: dict[str, str]


class Alive(Answer):
    """The process answers."""

    status: Literal["pass"] = "pass"


class ReadinessChecks(Answer):
    """What readiness rests on; null where it is not known."""

    store: Literal["pass", "fail"]
    keeper: Literal["pass", "warn"] | None
    workers: int | None
    workers_by_queue: dict[str, int] | None
    queued: dict[str, int] | None


class Readiness(Answer):
    """Whether jobs are taken; `warn`: they are, but nobody is seen who would work on them."""

    status: Literal["pass", "warn", "fail"]
    warnings: list[str]
    checks: ReadinessChecks


class ProblemPage(Answer):
    """What a problem type means, and what to do about it."""

    type: str
    title: str
    status: int
    advice: str


class ProblemEntry(Answer):
    """One fault: at a pointer into the document sent, or in a parameter or header."""

    pointer: str | None = Field(default=None, description="RFC 6901, into the document sent")
    parameter: str | None = None
    header: str | None = None
    code: str
    detail: str


class ProblemDocument(Answer):
    """An error answer (RFC 9457); further members belong to its type."""

    type: str
    title: str
    status: int
    detail: str
    instance: str
    errors: list[ProblemEntry] | None = None
    errors_truncated: bool | None = None


def dumped(answer: Answer) -> dict[str, Any]:
    """Write an answer as it goes over the wire: every member there, null where it is empty."""
    return answer.model_dump(mode="json", by_alias=True)
