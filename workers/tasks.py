"""The task that a queue carries: one attempt at one job, in a process of its own.

Planning runs in a helper thread; the main thread does all that concerns Redis, watches the caller's wish to stop, the
time limit and the wish to give the job back, and can end the process whatever the planning thread is doing.
"""

import logging
from collections.abc import Callable
from contextvars import ContextVar
from dataclasses import dataclass, field
from datetime import UTC, datetime
from functools import cache
from threading import Event, Lock, Thread
from time import monotonic

from pydantic import TypeAdapter
from redis import Redis
from redis.exceptions import RedisError
from rq import get_current_job

from schemas.job import Job
from schemas.problems import RefusedError
from schemas.records import Keys
from workers.attempts import Answer, Attempt, claim
from workers.planning.limits import Limits, StoppableWatch
from workers.planning.plan import PlanningError, plan

log = logging.getLogger(__name__)

LOOK_SECONDS = 0.1
REPORT_SECONDS = 0.5
OVERRUN_SECONDS = 10.0
"""Past its time limit a plan is asked to stop after one second, and given up after so many."""

KEEP_BEST_SECONDS = 10.0
"""What a plan that should hand over what it has may take to audit it."""


@dataclass(frozen=True)
class Surroundings:
    """What the worker process lends to the task."""

    redis: "Redis"
    keys: Keys
    threads: int
    give_back: Event = field(default_factory=Event)


SURROUNDINGS: ContextVar[Surroundings] = ContextVar("SURROUNDINGS")


@cache
def contract() -> TypeAdapter[Job]:
    """Build the reader of jobs once; a worker does so before it forks."""
    return TypeAdapter(Job)


def run(job_id: str) -> dict[str, str]:
    """Make one attempt at a job, and say in a word how it ended; the answer itself goes to the job's record."""
    carried = get_current_job()
    if carried is None:
        raise RuntimeError("this task is run by a worker")
    around = SURROUNDINGS.get()
    claimed = claim(around.redis, around.keys, carried.id)
    if claimed is None:
        log.info("job %s: the carrier %s is not its own any more", job_id, carried.id)
        return {"ended": "superseded"}
    return {"ended": Execution(claimed.attempt, claimed.request, around).run()}


class ReportingWatch(StoppableWatch):
    """Keeps the latest progress for the main thread to report, and by how much a diagnosis may overrun the limit."""

    def __init__(self) -> None:
        super().__init__()
        self.seconds_more = 0.0
        self._progress_lock = Lock()
        self._latest: tuple[str, float] | None = None

    def progress(self, phase: str, done: float) -> None:
        """Take note; may be called from any thread."""
        with self._progress_lock:
            self._latest = (phase, done)

    def more_time(self, seconds: float) -> None:
        """Take note that a diagnosis has begun, which may take so many seconds more."""
        self.seconds_more = seconds

    def take(self) -> tuple[str, float] | None:
        """Give what was noted since the last time."""
        with self._progress_lock:
            latest, self._latest = self._latest, None
        return latest


class Planning:
    """The planning thread, and what came out of it."""

    def __init__(self, request: bytes, threads: int, watch: ReportingWatch) -> None:
        self.ended = Event()
        self.seconds: float | None = None
        self.answer: Answer | None = None
        self.fault: BaseException | None = None
        self._request = request
        self._threads = threads
        self._watch = watch

    def start(self) -> None:
        """Begin; the thread does not keep its process alive."""
        Thread(target=self._plan, name="planning", daemon=True).start()

    def _plan(self) -> None:
        try:
            job = contract().validate_json(self._request)
            limits = Limits.of(job, datetime.now(UTC), threads=self._threads)
            self.seconds = limits.seconds
            self.answer = plan(job, limits, self._watch)
        except BaseException as fault:  # noqa: BLE001 - whatever it is, it ends this job and no other
            self.fault = fault
        finally:
            self.ended.set()


class Execution:
    """The main thread of an attempt."""

    def __init__(
        self, attempt: Attempt, request: bytes, around: Surroundings, clock: Callable[[], float] = monotonic
    ) -> None:
        self._attempt = attempt
        self._around = around
        self._clock = clock
        self._watch = ReportingWatch()
        self._planning = Planning(request, around.threads, self._watch)
        self._began = clock()
        self._reported = self._began
        self._stop_asked: float | None = None

    def run(self) -> str:
        """Plan to the end, or to the first reason to end sooner."""
        self._planning.start()
        while not self._planning.ended.wait(LOOK_SECONDS):
            if (ended := self._look()) is not None:
                return ended
        return self._hand_over()

    def _look(self) -> str | None:
        """Act on whatever has happened since the last look; returns how the attempt ended, if it did."""
        if self._around.give_back.is_set():
            self._watch.ask_stop()
            word = self._attempt.give_back()
            return self._attempt.cancel() if word == "lost" else word
        match self._told():
            case "lost":
                self._watch.ask_stop()
                return "superseded"
            case "cancel":
                self._watch.ask_stop()
                return self._attempt.cancel()
            case "keep_best":
                return self._keep_best()
        return self._past_its_time()

    def _told(self) -> str:
        """Report progress now and then, and hear what the caller wants; without Redis, nothing."""
        progress = None
        if self._clock() - self._reported >= REPORT_SECONDS and (progress := self._watch.take()):
            self._reported = self._clock()
        try:
            return self._attempt.report(*(progress or ("", 0.0)))
        except RedisError as fault:
            log.warning("job %s: Redis does not answer: %s", self._attempt.job_id, fault)
            return ""

    def _keep_best(self) -> str | None:
        if self._stop_asked is None:
            self._stop_asked = self._clock()
            self._watch.ask_stop()
        if self._clock() - self._stop_asked > KEEP_BEST_SECONDS:
            log.error("job %s: planning would not hand over what it had", self._attempt.job_id)
            return self._attempt.cancel()
        return None

    def _past_its_time(self) -> str | None:
        """Ask a plan that passes its limit to stop, and give it up when it does not: a limit is a promise."""
        limit = self._planning.seconds
        if limit is None:
            return None
        past = self._clock() - self._began - max(limit, 0.0) - self._watch.seconds_more
        if past > OVERRUN_SECONDS:
            log.error("job %s: planning ignored its time limit of %g s", self._attempt.job_id, limit)
            return self._attempt.fail(
                "time-limit-ignored", f"Planning did not end within its limit of {limit:g} s, and was given up."
            )
        if past > 1.0:
            self._watch.ask_stop()
        return None

    def _hand_over(self) -> str:
        planning = self._planning
        if planning.answer is not None:
            return self._attempt.hand_over(planning.answer)
        fault = planning.fault
        log.error("job %s, attempt %d: no answer", self._attempt.job_id, self._attempt.number, exc_info=fault)
        match fault:
            case MemoryError():
                return self._attempt.fail("out-of-memory", "There was not enough memory to plan this job.")
            case PlanningError():
                return self._attempt.fail("planning-fault", f"{fault.what}; it is not handed out.")
            case RefusedError():
                return self._attempt.fail("service-fault", f"The job was accepted, but cannot be planned: {fault}")
        return self._attempt.fail("service-fault", "An unexpected fault ended the planning; the worker's log has it.")
