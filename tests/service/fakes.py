"""Stores in memory that keep the promises of `service.store`; jobs stay queued until a test ends them."""

import hashlib
import json
import secrets
from collections.abc import Sequence
from datetime import UTC, datetime, timedelta
from threading import Condition as Signal
from typing import Any

from schemas.records import AnswerKind, JobRecord, JobState
from schemas.schedule import Outcome
from service.store import (
    LONGEST_WAIT_SECONDS,
    UNCONDITIONAL,
    Accepted,
    AlreadyEnded,
    BadCursor,
    Condition,
    DocumentKind,
    DocumentPage,
    Health,
    IdempotencyKey,
    JobForgotten,
    JobPage,
    KeyReused,
    NoAnswer,
    NoSuchAsset,
    NoSuchDocument,
    NoSuchJob,
    PreconditionFailed,
    Revision,
    RevisionPage,
    ScheduleParts,
    StillLive,
    Stored,
    StoreFull,
    StoreUnreachable,
    Submission,
    WorkerSeen,
)

Json = dict[str, Any]


class Outage:
    """Makes stores fail as Redis would; `lift` ends it."""

    def __init__(self) -> None:
        self.is_unreachable = False
        self.is_full = False

    def begin(self) -> None:
        self.is_unreachable = True

    def lift(self) -> None:
        self.is_unreachable = self.is_full = False

    def check(self) -> None:
        if self.is_unreachable:
            raise StoreUnreachable("the store is down")


class FakeJobStore:
    """A `JobStore`; `finish`, `infeasible` and the like stand for what a worker would do."""

    def __init__(self, outage: Outage | None = None) -> None:
        self.outage = outage or Outage()
        self.seen = Health("7.4", keeper_seen=True, workers=[WorkerSeen("w1", "jobs", is_busy=False)])
        self.waits: list[float] = []
        self._signal = Signal()
        self._records: dict[str, JobRecord] = {}
        self._requests: dict[str, bytes] = {}
        self._answers: dict[str, Json] = {}
        self._keys: dict[tuple[str, str], tuple[str, str]] = {}
        self._gone: set[str] = set()

    def recall(self, key: IdempotencyKey) -> Submission | None:
        self.outage.check()
        known = self._keys.get((key.scope, key.key))
        if known is None:
            return None
        if known[0] != key.fingerprint:
            raise KeyReused(key.key)
        return Submission(self.job(known[1]), replayed=True)

    def submit(self, accepted: Accepted, key: IdempotencyKey | None = None) -> Submission:
        self.outage.check()
        if self.outage.is_full:
            raise StoreFull("5 jobs are waiting", 7)
        with self._signal:
            if key is not None and (known := self.recall(key)):
                return known
            job = accepted.job
            record = JobRecord(
                id=f"job-{secrets.token_urlsafe(16)}",
                task=job.task,
                label=job.label,
                note=job.note,
                state="queued",
                method=job.method,
                created_at=datetime.now(UTC),
                request_sha256=hashlib.sha256(accepted.resolved).hexdigest(),
                fleet=accepted.fleet,
                window=accepted.window,
                urgent=job.urgent,
                queue_position=1,
            )
            self._records[record.id] = record
            self._requests[record.id] = accepted.resolved
            if key is not None:
                self._keys[key.scope, key.key] = (key.fingerprint, record.id)
        return Submission(record)

    def job(self, job_id: str) -> JobRecord:
        self.outage.check()
        if job_id in self._gone:
            raise JobForgotten(job_id)
        if job_id not in self._records:
            raise NoSuchJob(job_id)
        return self._records[job_id]

    def jobs(
        self, *, state: JobState | None = None, label: str | None = None, limit: int = 20, cursor: str | None = None
    ) -> JobPage:
        self.outage.check()
        found = [
            record
            for record in reversed(self._records.values())
            if state in (None, record.state) and label in (None, record.label)
        ]
        if cursor is not None:
            places = [place for place, record in enumerate(found) if record.id == cursor]
            if not places:
                raise BadCursor(cursor)
            found = found[places[0] + 1 :]
        return JobPage(found[:limit], found[limit - 1].id if len(found) > limit else None)

    def wait(self, job_id: str, seconds: float) -> JobRecord:
        self.waits.append(seconds)
        with self._signal:
            self._signal.wait_for(lambda: not self.job(job_id).is_live, min(seconds, LONGEST_WAIT_SECONDS))
        return self.job(job_id)

    def cancel(self, job_id: str, *, keep_best: bool = False) -> JobRecord:
        record = self.job(job_id)
        if record.state in ("finished", "failed"):
            raise AlreadyEnded(record)
        if record.state == "queued":
            self._end(job_id, "cancelled", None)
        elif record.state == "running":
            self._change(job_id, state="cancelling", cancel="keep_best" if keep_best else "cancel")
        return self.job(job_id)

    def delete(self, job_id: str) -> None:
        record = self.job(job_id)
        if record.is_live:
            raise StillLive(record)
        self._gone.add(job_id)
        del self._records[job_id]

    def request(self, job_id: str) -> bytes:
        self.job(job_id)
        return self._requests[job_id]

    def answer_kind(self, job_id: str) -> AnswerKind | None:
        return self.job(job_id).answer

    def schedule(self, job_id: str, asset_ids: Sequence[str] | None = None) -> ScheduleParts:
        record = self.job(job_id)
        if record.answer != "schedule":
            raise NoAnswer(record)
        head = dict(self._answers[job_id])
        assets = head.pop("assets")
        unknown = sorted(set(asset_ids or ()) - {asset["id"] for asset in assets})
        if unknown:
            raise NoSuchAsset(unknown)
        return ScheduleParts(head, (asset for asset in assets if asset_ids is None or asset["id"] in asset_ids))

    def diagnosis(self, job_id: str) -> Json:
        record = self.job(job_id)
        if record.answer not in ("diagnosis", "undecided"):
            raise NoAnswer(record)
        return json.loads(json.dumps(self._answers[job_id]))  # type: ignore[no-any-return]

    def ping(self) -> None:
        self.outage.check()

    def health(self) -> Health:
        self.outage.check()
        return self.seen

    def begin(self, job_id: str) -> None:
        """Let a worker take the job up."""
        self._change(job_id, state="running", attempt=1, started_at=datetime.now(UTC), queue_position=None)

    def finish(self, job_id: str, answer: Json, outcome: Outcome = "optimal", kind: AnswerKind = "schedule") -> None:
        """Let the job end with an answer."""
        self._answers[job_id] = answer
        self._end(job_id, "finished", outcome, answer=kind)

    def fail(self, job_id: str) -> None:
        """Let the job fail without an answer."""
        self._end(job_id, "failed", None, error={"reason": "worker-lost", "detail": "three workers died on it"})

    def _end(self, job_id: str, state: JobState, outcome: Outcome | None, **more: Any) -> None:
        now = datetime.now(UTC)
        ended = {"finished_at": now, "expires_at": now + timedelta(days=7), "queue_position": None}
        self._change(job_id, state=state, outcome=outcome, **ended, **more)

    def _change(self, job_id: str, **members: Any) -> None:
        with self._signal:
            record = self._records[job_id]
            self._records[job_id] = JobRecord.model_validate({**record.__dict__, **members})
            self._signal.notify_all()


class FakeDocumentStore:
    """A `DocumentStore`."""

    def __init__(self, outage: Outage | None = None) -> None:
        self.outage = outage or Outage()
        self._stored: dict[tuple[DocumentKind, str], list[Stored]] = {}
        self._numbers: dict[tuple[DocumentKind, str], int] = {}

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
        self.outage.check()
        place = (kind, document_id)
        self._require(place, condition)
        number = self._numbers[place] = self._numbers.get(place, 0) + 1
        revision = Revision(
            number=number,
            written_at=datetime.now(UTC),
            written_by=written_by,
            note=note,
            sha256=hashlib.sha256(text).hexdigest(),
        )
        self._stored.setdefault(place, []).append(Stored(document_id, revision, text))
        return revision

    def get(self, kind: DocumentKind, document_id: str, revision: int | None = None) -> Stored:
        self.outage.check()
        found = self._stored.get((kind, document_id), [])
        wanted = [each for each in found if revision in (None, each.revision.number)]
        if not wanted:
            raise NoSuchDocument(document_id)
        return wanted[-1]

    def remove(self, kind: DocumentKind, document_id: str, condition: Condition = UNCONDITIONAL) -> None:
        self.get(kind, document_id)
        self._require((kind, document_id), condition)
        del self._stored[kind, document_id]

    def documents(self, kind: DocumentKind, *, limit: int = 20, cursor: str | None = None) -> DocumentPage:
        self.outage.check()
        ids = sorted(name for of, name in self._stored if of == kind and name > (cursor or ""))
        if cursor is not None and (kind, cursor) not in self._stored:
            raise BadCursor(cursor)
        page = [(name, self._stored[kind, name][-1].revision) for name in ids[:limit]]
        return DocumentPage(page, ids[limit - 1] if len(ids) > limit else None)

    def revisions(
        self, kind: DocumentKind, document_id: str, *, limit: int = 20, cursor: str | None = None
    ) -> RevisionPage:
        self.get(kind, document_id)
        numbers = [each.revision for each in reversed(self._stored[kind, document_id])]
        if cursor is not None:
            if not cursor.isdecimal():
                raise BadCursor(cursor)
            numbers = [revision for revision in numbers if revision.number < int(cursor)]
        return RevisionPage(numbers[:limit], str(numbers[limit - 1].number) if len(numbers) > limit else None)

    def _require(self, place: tuple[DocumentKind, str], condition: Condition) -> None:
        found = self._stored.get(place)
        current = found[-1].revision.etag if found else None
        matches = condition.any_of is None or (current is not None and bool({"*", current} & condition.any_of))
        if not matches or (condition.must_be_new and current is not None):
            raise PreconditionFailed(current)
