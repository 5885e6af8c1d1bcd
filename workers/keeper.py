"""The keeper: returns jobs that were lost to their queues, and forgets what has expired.

It compares what the records say with where the carriers are: in a queue, on their way out of it, or held by a worker
that is alive. It alone repairs the difference, each repair by one compare in Redis: a second keeper, or one that slept
through its lock, finds nothing left to repair. RQ's own clean-up is never called: it has no such compare.
"""

import logging
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from time import monotonic
from typing import Any

from redis import Redis
from rq import Queue
from rq.exceptions import DuplicateJobError
from rq.job import Job
from rq.scripts import acquire_or_refresh_lock, release_lock
from rq.worker_registration import clean_worker_registry

from schemas.records import QUEUES, TASK, URGENT_QUEUE, Keys, carried_job, carrier_name, carrier_options
from workers import scripts
from workers.leases import LEASE_SECONDS, Leases

log = logging.getLogger(__name__)

TICK_SECONDS = 1.0
LOCK_SECONDS = 10
ON_THE_WAY_SECONDS = 5.0
"""So long a carrier may lie between its queue and a worker, or a record be without a carrier, as a submission ends."""

COMPARE_ALL_SECONDS = 5.0
LONGEST_GAP_SECONDS = 4.0
"""After a longer gap between two ticks, what was seen before says nothing about who is alive."""

MOST_CARRIERS_UNBEGUN = 10
EXPIRED_AT_ONCE = 100
WORKERS_CLEANED_SECONDS = 60.0


@dataclass(frozen=True)
class Places:
    """Where carriers are, read in one step; `held` has the heartbeat of each execution by `carrier:execution`."""

    begun: set[str]
    due: set[str]
    on_the_way: set[str]
    held: dict[str, float]


class Keeper:
    """One keeper; `tick` is called once a second."""

    def __init__(self, redis: "Redis", keys: Keys, name: str, clock: Callable[[], float] = monotonic) -> None:
        self._redis = redis
        self._keys = keys
        self._name = name
        self._clock = clock
        self._queues = {queue: Queue(queue, connection=redis, serializer="json") for queue in QUEUES}
        self._leases = Leases(LEASE_SECONDS, clock)
        self._astray = Leases(ON_THE_WAY_SECONDS, clock)
        self._without = Leases(ON_THE_WAY_SECONDS, clock)
        self._lose = redis.register_script(scripts.LOSE)
        self._ticked = clock()
        self._compared = self._cleaned = float("-inf")

    def tick(self) -> bool:
        """Hold the lock and repair what there is to repair; False where another keeper holds it."""
        gap, self._ticked = self._clock() - self._ticked, self._clock()
        if gap > LONGEST_GAP_SECONDS:
            self.look_anew()
        if acquire_or_refresh_lock(self._redis, self._keys.keeper, self._name, LOCK_SECONDS) == "taken":
            self.look_anew()
            return False
        # Refused where Redis is full: then no worker can renew a lease either, and none is to be judged.
        self._redis.hset(f"{self._keys.keeper}:ticks", self._name, "1")
        places = self._places()
        self._return_lost(places)
        if self._clock() - self._compared >= COMPARE_ALL_SECONDS:
            self._compared = self._clock()
            self._return_missing()
        self._enqueue_due()
        self._forget_expired()
        self._clean_workers()
        return True

    def look_anew(self) -> None:
        """Forget what was seen of carriers and workers."""
        for leases in (self._leases, self._astray, self._without):
            leases.forget()

    def step_down(self) -> None:
        """Leave the lock to the next keeper, if it is still this one's."""
        release_lock(self._redis, self._keys.keeper, self._name)

    def _places(self) -> Places:
        with self._redis.pipeline(transaction=True) as pipeline:
            pipeline.zrange(self._keys.started, 0, -1)
            pipeline.zrangebyscore(self._keys.waiting, 0, 0)
            for queue in self._queues.values():
                pipeline.lrange(queue.intermediate_queue_key, 0, -1)
                pipeline.zrange(queue.started_job_registry.key, 0, -1, withscores=True)
            begun, due, *rest = pipeline.execute()
        held = {entry.decode(): score for answer in rest[1::2] for entry, score in answer}
        on_the_way = {entry.decode() for answer in rest[0::2] for entry in answer}
        return Places(_names(begun), _names(due), on_the_way, held)

    def _return_lost(self, places: Places) -> None:
        """Return what was begun and is on no living worker, and what a worker took and never registered."""
        dead = self._leases.dead(places.held)
        alive = {entry.rpartition(":")[0] for entry in places.held if entry not in dead}
        for name in sorted(places.begun - alive):
            self._lost(name)
        astray = self._astray.dead(dict.fromkeys(places.on_the_way - alive, 0.0))
        for name in sorted(astray - places.begun):
            self._lost(name)
        for entry in dead:
            self._drop(entry.rpartition(":")[0], entry)
        for name in astray:
            self._drop(name)

    def _return_missing(self) -> None:
        """Return jobs that wait by their records and are nowhere: their submission was cut short."""
        with self._redis.pipeline(transaction=True) as pipeline:
            pipeline.zrangebyscore(self._keys.waiting, "(0", "+inf")
            for queue in self._queues.values():
                pipeline.lrange(queue.key, 0, -1)
                pipeline.lrange(queue.intermediate_queue_key, 0, -1)
                pipeline.zrange(queue.started_job_registry.key, 0, -1)
            waiting, *rest = pipeline.execute()
        somewhere = {entry.decode().partition(":")[0] for answer in rest for entry in answer}
        missing = _names(waiting) - somewhere
        for name in sorted(self._without.dead(dict.fromkeys(missing, 0.0))):
            self._lost(name)

    def _lost(self, name: str) -> None:
        """Take note of a lost carrier; Redis lets it through once."""
        job_id, number = carried_job(name), int(name.rpartition("-")[2])
        keys = self._keys
        word: bytes = self._lose(
            keys=[keys.job(job_id), keys.waiting, keys.started, keys.expiring, keys.ended(job_id)],
            args=[job_id, number, name, carrier_name(job_id, number + 1), MOST_CARRIERS_UNBEGUN],
        )
        log.warning("the carrier %s was lost; its job: %s", name, word.decode())

    def _drop(self, name: str, execution: str | None = None) -> None:
        """Remove what is left of a carrier in RQ's keys."""
        with self._redis.pipeline() as pipeline:
            pipeline.unlink(Job.key_for(name))
            for queue in self._queues.values():
                pipeline.lrem(queue.intermediate_queue_key, 0, name)
                if execution is not None:
                    pipeline.zrem(queue.started_job_registry.key, execution)
            pipeline.execute()

    def _enqueue_due(self) -> None:
        """Put into their queues the jobs that were returned, by whoever did so."""
        due: Any = self._redis.zrangebyscore(self._keys.waiting, 0, 0)
        for name in sorted(_names(due)):
            job_id, number = carried_job(name), int(name.rpartition("-")[2])
            is_urgent: Any = self._redis.hget(self._keys.job(job_id), "urgent")
            queue = self._queues[URGENT_QUEUE if is_urgent == b"1" else QUEUES[0]]
            try:
                queue.enqueue(TASK, job_id, at_front=True, **carrier_options(job_id, number))
            except DuplicateJobError:
                log.info("%s was in its queue already", name)
            self._redis.zadd(self._keys.waiting, {name: 1}, xx=True)

    def _forget_expired(self) -> None:
        """Forget jobs whose time is over, and remember for as long again that they were there."""
        seconds, microseconds = self._redis.time()
        now = seconds * 1000 + microseconds // 1000
        expired: Any = self._redis.zrangebyscore(self._keys.expiring, "-inf", now, start=0, num=EXPIRED_AT_ONCE)
        for job_id in _names(expired):
            kept: Any = self._redis.hget(self._keys.job(job_id), "retention_seconds")
            with self._redis.pipeline() as pipeline:
                pipeline.unlink(*self._keys.all_of_job(job_id))
                pipeline.zrem(self._keys.by_time, job_id)
                pipeline.zrem(self._keys.expiring, job_id)
                if kept is not None:
                    pipeline.set(self._keys.gone(job_id), "expired", px=max(1, int(float(kept) * 1000)))
                pipeline.execute()

    def _clean_workers(self) -> None:
        if self._clock() - self._cleaned >= WORKERS_CLEANED_SECONDS:
            self._cleaned = self._clock()
            for queue in self._queues.values():
                clean_worker_registry(queue)


def _names(answer: Iterable[bytes]) -> set[str]:
    return {entry.decode() for entry in answer}
