"""Who is at work for the store: the keeper by its lock, workers by the heartbeats that RQ writes."""

from collections.abc import Mapping
from datetime import UTC, datetime
from typing import cast

from redis import Redis
from rq import Queue
from rq.utils import utcparse
from rq.worker_registration import WORKERS_BY_QUEUE_KEY

from schemas.records import Keys
from service.store import Health, WorkerSeen
from service.store.calls import text_of

SEEN_SECONDS = 17.0


def health(redis: "Redis", keys: Keys, queues: Mapping[str, Queue], memory_share: float | None) -> Health:
    """Look at the keeper's lock, the workers' heartbeats and the queues; nothing is cleaned up here."""
    workers = [worker for name in queues for worker in _workers(redis, name)]
    with redis.pipeline(transaction=False) as pipeline:
        pipeline.exists(keys.keeper)
        for queue in queues.values():
            pipeline.llen(queue.key)
        is_kept, *lengths = pipeline.execute()
    facts = redis.info("server")
    return Health(
        redis_version=str(facts["redis_version"]),
        keeper_seen=bool(is_kept),
        workers=workers,
        queued=dict(zip(queues, lengths, strict=True)),
        memory_share=memory_share,
    )


def _workers(redis: "Redis", queue: str) -> list[WorkerSeen]:
    keys = sorted(text_of(key) for key in cast(set[bytes], redis.smembers(WORKERS_BY_QUEUE_KEY % queue)))
    with redis.pipeline(transaction=False) as pipeline:
        for key in keys:
            pipeline.hmget(key, ["last_heartbeat", "state", "death"])
        answers = pipeline.execute()
    now = datetime.now(UTC)
    return [
        WorkerSeen(name=key.rpartition(":")[2], queue=queue, is_busy=state == b"busy")
        for key, (heard, state, death) in zip(keys, answers, strict=True)
        if heard and not death and abs((now - utcparse(text_of(heard))).total_seconds()) < SEEN_SECONDS
    ]
