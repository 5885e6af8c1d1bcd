"""A worker: RQ's, with the timers, signals and upkeep that a queue of solver jobs needs.

What is overridden, and why, is measured in the tests beside it: RQ 3.0 takes minutes to notice a dead worker, kills its
own process group when asked to stop a job at the wrong moment, and cleans registries without a lock.
"""

import os
import signal
from collections.abc import Callable
from datetime import UTC, datetime
from threading import Timer
from types import FrameType
from typing import Any

from redis import Redis
from redis.exceptions import RedisError
from rq import Queue, Worker
from rq.executions import Execution
from rq.job import Job
from rq.worker.base import WorkerStatus

from schemas.records import Keys, carried_job
from workers import scripts
from workers.attempts import Attempt
from workers.leases import LEASE_SECONDS
from workers.parent_death import die_with_parent
from workers.settings import Settings
from workers.tasks import OVERRUN_SECONDS, SURROUNDINGS, Surroundings

HEARTBEAT_SECONDS = 2
WORKER_TTL_SECONDS = 17
"""RQ blocks on its queue for 15 s less than that."""

KILL_AFTER_SECONDS = 5.0
"""What a work-horse has to give its job back."""

LOOKS_BEFORE_KILLING = 3
"""A work-horse past every limit is killed at the third look: Redis may have been away, and it about to write."""


class PlanningWorker(Worker):
    """Takes jobs from one queue, each into a forked process of its own."""

    def __init__(self, queue: Queue, redis: "Redis", settings: Settings, name: str | None = None) -> None:
        super().__init__(
            [queue],
            name=name,
            connection=redis,
            worker_ttl=WORKER_TTL_SECONDS,
            job_monitoring_interval=HEARTBEAT_SECONDS,
            default_result_ttl=0,
            log_job_description=False,
            serializer="json",
        )
        self.log_result_lifespan = False
        self._settings = settings
        self._keys = Keys(settings.key_prefix)
        self._around = Surroundings(redis, self._keys, settings.threads)
        self._witness = redis.register_script(scripts.WITNESS)
        self._looks_past_limit = 0

    # Upkeep: the keeper's business, and nobody else's.

    @property
    def should_run_maintenance_tasks(self) -> bool:
        """Never: cleaning in more than one process queues jobs twice."""
        return False

    def subscribe(self) -> None:
        """Listen to no commands: a stop goes by the record, and a process that forks has no other thread."""

    def unsubscribe(self) -> None:
        """Nothing was subscribed to."""

    def procline(self, message: str) -> None:
        """Leave the command line as it is: whoever lists processes should find the command that was started."""

    # Heartbeats.

    def get_heartbeat_ttl(self, job: Job, working_time: float = 0.0) -> int:  # noqa: ARG002
        """Give the lease: the same however long the job has run or may run."""
        return LEASE_SECONDS

    def heartbeat(self, timeout: int | None = None, pipeline: Any = None) -> None:
        """Send a heartbeat in one round trip instead of three."""
        if pipeline is not None:
            super().heartbeat(timeout, pipeline)
            return
        with self.connection.pipeline(transaction=False) as own:
            super().heartbeat(timeout, own)
            own.execute()

    def maintain_heartbeats(self, job: Job, execution: Execution) -> None:
        """Keep the lease and look whether the work-horse is past every limit; survive a Redis that is away or full."""
        try:
            super().maintain_heartbeats(job, execution)
            self._enforce(job)
        except RedisError as fault:
            self.log.warning("Worker %s: no heartbeat for %s: %s", self.name, job.id, fault)

    def _enforce(self, job: Job) -> None:
        """End a job whose process neither answers a stop nor keeps its time, and kill the process.

        The process watches itself; this is for one whose main thread cannot run.
        """
        answer: Any = self.connection.hmget(
            self._keys.job(carried_job(job.id)), ["state", "attempt", "started_at", "time_limit_seconds", "cancel"]
        )
        state, attempt, _, limit, wish = (None if part is None else part.decode() for part in answer)
        if state not in ("running", "cancelling") or job.started_at is None:
            return
        seconds = (datetime.now(UTC) - job.started_at).total_seconds()
        is_past = seconds > float(limit or 0) + OVERRUN_SECONDS + HEARTBEAT_SECONDS
        self._looks_past_limit = self._looks_past_limit + 1 if is_past or wish == "cancel" else 0
        if self._looks_past_limit < LOOKS_BEFORE_KILLING:
            return
        own = Attempt(self.connection, self._keys, job.id, int(attempt or 0))
        if wish == "cancel":
            own.cancel()
        else:
            own.fail("time-limit-ignored", f"Planning did not end within its limit of {limit} s, and was killed.")
        self.log.error("Worker %s: the work-horse of %s is past every limit and is killed", self.name, job.id)
        self.kill_horse()

    # The work-horse.

    def fork_work_horse(self, job: Job, queue: Queue) -> None:
        """Fork with SIGTERM held back until the child knows what to do on it."""
        self._looks_past_limit = 0
        self._worker_pid = os.getpid()
        signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGTERM})
        try:
            super().fork_work_horse(job, queue)
        finally:
            signal.pthread_sigmask(signal.SIG_UNBLOCK, {signal.SIGTERM})

    def main_work_horse(self, job: Job, queue: Queue) -> None:
        """Run one job and end; die with the worker, and keep what native code prints off standard output."""
        die_with_parent(self._worker_pid)
        os.dup2(os.open(os.devnull, os.O_WRONLY), 1)
        SURROUNDINGS.set(self._around)
        super().main_work_horse(job, queue)

    def setup_work_horse_signals(self) -> None:
        """Take SIGTERM as the wish to have the job given back."""
        super().setup_work_horse_signals()  # type: ignore[no-untyped-call]
        signal.signal(signal.SIGTERM, lambda _signum, _frame: self._around.give_back.set())
        signal.pthread_sigmask(signal.SIG_UNBLOCK, {signal.SIGTERM})

    def kill_horse(self, sig: signal.Signals = signal.SIGKILL) -> None:
        """Signal the work-horse and what it started, and never this process's own group."""
        if not (pid := self.horse_pid):
            return
        try:
            if os.getpgid(pid) == os.getpgid(0):
                os.kill(pid, sig)  # it has not made a group of its own yet
            else:
                os.killpg(os.getpgid(pid), sig)
        except ProcessLookupError:
            self.log.debug("Worker %s: work-horse %s is gone already", self.name, pid)

    def handle_work_horse_killed(self, job: Job, retpid: int, ret_val: int, rusage: Any) -> None:  # noqa: ARG002
        """Leave word of how it died; the keeper decides what becomes of the job."""
        how = how_it_ended(ret_val)
        try:
            self._witness(keys=[self._keys.job(carried_job(job.id))], args=[job.id.rpartition("-")[2], how])
        except RedisError as fault:
            self.log.warning("Worker %s: %s: %s; Redis: %s", self.name, job.id, how, fault)

    # The end of a carrier: the record says what became of the job, so nothing of the carrier is kept.

    def handle_execution_ended(self, job: Job, queue: Queue, heartbeat_ttl: int) -> None:  # noqa: ARG002
        """Note the time; no heartbeat is due on what is about to be deleted."""
        job.ended_at = datetime.now(UTC)

    def handle_job_success(self, job: Job, queue: Queue, started_job_registry: Any, execution: Execution) -> None:  # noqa: ARG002
        """Drop the carrier: it has no result, no dependents and no repeats."""
        self._drop(job, execution)

    def handle_job_failure(
        self,
        job: Job,
        queue: Queue,  # noqa: ARG002
        started_job_registry: Any = None,  # noqa: ARG002
        exc_string: str = "",
        execution: Execution | None = None,
    ) -> None:
        """Drop the carrier: the keeper finds its job begun and on no worker."""
        self.log.error("Worker %s: %s ended without a word: %s", self.name, job.id, exc_string)
        self._drop(job, execution)

    def _drop(self, job: Job, execution: Execution | None) -> None:
        with self.connection.pipeline() as pipeline:
            self.cleanup_execution(job, pipeline=pipeline, execution=execution)
            pipeline.unlink(job.key, job.execution_registry.key)
            pipeline.execute()

    # Stopping.

    def request_stop(self, signum: int, frame: FrameType | None) -> None:
        """Take no more jobs; a running one has the grace to end, and is then given back."""
        super().request_stop(signum, frame)  # type: ignore[no-untyped-call]
        self._after(self._settings.grace_seconds, self._ask_back)

    def _ask_back(self) -> None:
        if self.get_state() != WorkerStatus.BUSY:
            return
        if not self.horse_pid:
            self._after(0.2, self._ask_back)
            return
        self.kill_horse(signal.SIGTERM)
        self._after(KILL_AFTER_SECONDS, self.kill_horse)

    def _after(self, seconds: float, act: Callable[[], None]) -> None:
        timer = Timer(seconds, act)
        timer.daemon = True
        timer.start()


def how_it_ended(status: int | None) -> str:
    """Put the status of a process that was waited for in words."""
    if status is None:
        return "its process was killed by its worker"
    if os.WIFSIGNALED(status):
        number = os.WTERMSIG(status)
        often = ", as the kernel does where memory runs out" if number == signal.SIGKILL else ""
        return f"its process was ended by signal {number}{often}"
    return f"its process ended with status {os.waitstatus_to_exitcode(status)}"
