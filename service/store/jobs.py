"""Jobs in Redis: the record first, then its carrier into the queue."""

import hashlib
import json
import logging
import secrets
import zlib
from collections.abc import Iterator, Sequence
from contextlib import closing
from datetime import UTC, datetime
from time import monotonic
from typing import Any, cast

from redis import Redis
from redis.client import PubSub
from redis.exceptions import RedisError
from rq import Queue
from rq.exceptions import DuplicateJobError
from rq.job import Job as CarriedJob

from schemas.records import (
    COMPRESSION,
    QUEUES,
    TASK,
    AnswerKind,
    JobRecord,
    JobState,
    Keys,
    carrier_name,
    carrier_options,
    fields_of,
    record_of,
)
from service.settings import Settings
from service.store import (
    LONGEST_WAIT_SECONDS,
    Accepted,
    AlreadyEnded,
    Health,
    IdempotencyKey,
    JobForgotten,
    JobPage,
    KeyReused,
    NoAnswer,
    NoSuchAsset,
    NoSuchJob,
    ScheduleParts,
    StillLive,
    StoreFull,
    Submission,
    scripts,
)
from service.store.calls import Memory, text_of, translated
from service.store.listing import list_jobs
from service.store.presence import health

log = logging.getLogger(__name__)

LOOK_AGAIN_SECONDS = 1.0
"""A waiting caller looks at the record itself so often: the word that a job has ended may be lost."""

ASSETS_AT_ONCE = 64
QUEUE_IS_LONG_RETRY_SECONDS = 10


class RedisJobStore:
    """Keeps the promises of `service.store.JobStore`."""

    def __init__(self, redis: "Redis", settings: Settings) -> None:
        self._redis = redis
        self._settings = settings
        self._keys = Keys(settings.key_prefix)
        self._memory = Memory(redis)
        self._queues = {name: Queue(name, connection=redis, serializer="json") for name in QUEUES}
        self._submit = redis.register_script(scripts.SUBMIT)
        self._cancel = redis.register_script(scripts.CANCEL)
        self._forget = redis.register_script(scripts.FORGET)

    def recall(self, key: IdempotencyKey) -> Submission | None:
        """Give the job that a submission with this key became."""
        with translated():
            known = cast(bytes | None, self._redis.get(self._idempotency_key(key)))
        if known is None:
            return None
        fingerprint, job_id = known.decode().split(" ")
        if fingerprint != key.fingerprint:
            raise KeyReused(key.key)
        return Submission(self.job(job_id), replayed=True)

    def submit(self, accepted: Accepted, key: IdempotencyKey | None = None) -> Submission:
        """Write the record, then enqueue; what the queue does not take at once the keeper puts there."""
        record = self._new_record(accepted)
        queue = self._queues[record.queue]
        fields = fields_of(record)
        del fields["created_at"]  # Redis's own clock says when
        with translated():
            self._memory.require_room(self._settings.memory_share)
            word, *rest = self._submit(
                keys=[
                    self._keys.job(record.id),
                    self._keys.request(record.id),
                    self._keys.by_time,
                    self._keys.waiting,
                    self._idempotency_key(key) if key else self._keys.idempotency("none"),
                    queue.key,
                ],
                args=[
                    key.fingerprint if key else "",
                    int(self._settings.idempotency_hours * 3_600_000),
                    self._settings.longest_queue,
                    record.id,
                    carrier_name(record.id, record.carrier),
                    zlib.compress(accepted.resolved, COMPRESSION),
                    *(part for field in fields.items() for part in field),
                ],
            )
        if word == b"full":
            why = f"{int(rest[0])} jobs are waiting in the queue `{queue.name}`"
            raise StoreFull(why, QUEUE_IS_LONG_RETRY_SECONDS)
        if word == b"reused":
            raise KeyReused(key.key if key else "")
        if word == b"replay":
            return Submission(self.job(text_of(rest[0])), replayed=True)
        self._enqueue(queue, record)
        return Submission(self.job(record.id))

    def job(self, job_id: str) -> JobRecord:
        """Read a job, and count where it stands in its queue."""
        with translated(), self._redis.pipeline(transaction=False) as pipeline:
            pipeline.hgetall(self._keys.job(job_id))
            pipeline.exists(self._keys.gone(job_id))
            fields, is_gone = pipeline.execute()
            if not fields:
                raise JobForgotten(job_id) if is_gone else NoSuchJob(job_id)
            record = record_of({text_of(name): text_of(value) for name, value in fields.items()})
            if record.state != "queued":
                return record
            name = carrier_name(record.id, record.carrier)
            ahead = cast(int | None, self._redis.lpos(self._queues[record.queue].key, name))
        return record if ahead is None else record.model_copy(update={"queue_position": ahead + 1})

    def jobs(
        self, *, state: JobState | None = None, label: str | None = None, limit: int = 20, cursor: str | None = None
    ) -> JobPage:
        """List jobs, newest first."""
        with translated():
            return list_jobs(self._redis, self._keys, state=state, label=label, limit=limit, cursor=cursor)

    def wait(self, job_id: str, seconds: float) -> JobRecord:
        """Listen for the end of a job; the record is read again whatever was heard."""
        until = monotonic() + min(seconds, LONGEST_WAIT_SECONDS)
        listener: PubSub = self._redis.pubsub()  # type: ignore[no-untyped-call]
        with translated(), closing(listener) as heard:
            heard.subscribe(self._keys.ended(job_id))
            heard.get_message(timeout=LOOK_AGAIN_SECONDS)  # the subscription stands before the record is read
            while (record := self.job(job_id)).is_live and (left := until - monotonic()) > 0:
                heard.get_message(timeout=min(left, LOOK_AGAIN_SECONDS))
        return record

    def cancel(self, job_id: str, *, keep_best: bool = False) -> JobRecord:
        """End what waits, and ask what runs to end."""
        keys = [self._keys.job(job_id), self._keys.waiting, self._keys.expiring, self._keys.ended(job_id)]
        with translated():
            word = text_of(self._cancel(keys=keys, args=["keep_best" if keep_best else "cancel", job_id]))
        record = self.job(job_id)
        if word in ("finished", "failed"):
            raise AlreadyEnded(record)
        if record.state == "cancelled":
            self._take_out(record)
        return record

    def delete(self, job_id: str) -> None:
        """Forget an ended job."""
        keys = [*self._keys.all_of_job(job_id), self._keys.by_time, self._keys.expiring, self._keys.gone(job_id)]
        remembered_ms = int(self._settings.retention_days * 86_400_000)
        with translated():
            word = text_of(self._forget(keys=keys, args=[job_id, remembered_ms]))
        if word == "live":
            raise StillLive(self.job(job_id))
        if word == "none":
            self.job(job_id)  # says whether it was ever there

    def request(self, job_id: str) -> bytes:
        """Give the resolved request as it was accepted."""
        with translated():
            packed = cast(bytes | None, self._redis.get(self._keys.request(job_id)))
        if packed is None:
            record = self.job(job_id)
            raise NoAnswer(record)
        return zlib.decompress(packed)

    def answer_kind(self, job_id: str) -> AnswerKind | None:
        """Tell what kind of answer the job has."""
        return self.job(job_id).answer

    def schedule(self, job_id: str, asset_ids: Sequence[str] | None = None) -> ScheduleParts:
        """Read the head of a schedule now and its assets when they are asked for."""
        self._require_answer(job_id, ("schedule",))
        with translated():
            head, order = cast(list[bytes | None], self._redis.hmget(self._keys.answer(job_id), ["head", "order"]))
        if head is None or order is None:
            raise JobForgotten(job_id)
        known: list[str] = json.loads(zlib.decompress(order))
        if asset_ids is not None:
            wanted = set(asset_ids)
            if unknown := sorted(wanted.difference(known)):
                raise NoSuchAsset(unknown)
            known = [asset_id for asset_id in known if asset_id in wanted]
        return ScheduleParts(json.loads(zlib.decompress(head)), self._assets(job_id, known))

    def diagnosis(self, job_id: str) -> dict[str, Any]:
        """Read a diagnosis, or what an undecided job knows."""
        self._require_answer(job_id, ("diagnosis", "undecided"))
        with translated():
            head = cast(bytes | None, self._redis.hget(self._keys.answer(job_id), "head"))
        if head is None:
            raise JobForgotten(job_id)
        return cast(dict[str, Any], json.loads(zlib.decompress(head)))

    def ping(self) -> None:
        """Return if Redis answers."""
        with translated():
            self._redis.ping()

    def health(self) -> Health:
        """Tell who is at work."""
        with translated():
            return health(self._redis, self._keys, self._queues, self._memory.share())

    def _new_record(self, accepted: Accepted) -> JobRecord:
        job = accepted.job
        return JobRecord(
            id=f"job-{secrets.token_urlsafe(16)}",
            task=job.task,
            label=job.label,
            note=job.note,
            submitted_by=accepted.submitted_by,
            state="queued",
            method=job.method,
            created_at=datetime.now(UTC),
            request_sha256=hashlib.sha256(accepted.resolved).hexdigest(),
            fleet=accepted.fleet,
            window=accepted.window,
            urgent=job.urgent,
            time_limit_seconds=job.time_limit_seconds,
            retention_seconds=self._settings.retention_days * 86_400,
        )

    def _idempotency_key(self, key: IdempotencyKey) -> str:
        return self._keys.idempotency(hashlib.sha256(f"{key.scope}\n{key.key}".encode()).hexdigest())

    def _enqueue(self, queue: Queue, record: JobRecord) -> None:
        try:
            queue.enqueue(TASK, record.id, **carrier_options(record.id, record.carrier))
        except DuplicateJobError:
            log.info("job %s was in its queue already", record.id)
        except RedisError as fault:
            # Accepted is accepted: the record stands, and the keeper puts into the queue what is not there.
            log.warning("job %s is left to the keeper to be queued: %s", record.id, fault)

    def _take_out(self, record: JobRecord) -> None:
        """Take a cancelled job's carrier out of the queue, so that no worker wakes for it."""
        name = carrier_name(record.id, record.carrier)
        with translated(), self._redis.pipeline(transaction=False) as pipeline:
            pipeline.lrem(self._queues[record.queue].key, 1, name)
            pipeline.unlink(CarriedJob.key_for(name))
            pipeline.execute()

    def _require_answer(self, job_id: str, kinds: tuple[AnswerKind, ...]) -> None:
        record = self.job(job_id)
        if record.answer not in kinds:
            raise NoAnswer(record)

    def _assets(self, job_id: str, asset_ids: list[str]) -> Iterator[dict[str, Any]]:
        for start in range(0, len(asset_ids), ASSETS_AT_ONCE):
            names = [f"asset:{asset_id}" for asset_id in asset_ids[start : start + ASSETS_AT_ONCE]]
            with translated():
                chunks = cast(list[bytes | None], self._redis.hmget(self._keys.answer(job_id), names))
            for chunk in chunks:
                if chunk is None:
                    raise JobForgotten(job_id)
                yield json.loads(zlib.decompress(chunk))
