"""What a plan may take, and who watches it."""

from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, contextmanager, nullcontext
from dataclasses import dataclass
from datetime import datetime
from threading import Lock
from time import monotonic
from typing import Protocol

from schemas.job import Question

SECONDS_TO_HAND_OVER = 5.0
"""Left between the end of planning and `needed_by`, for the caller to fetch the schedule."""

AUDIT_SHARE = 0.1
"""Share of the time that solvers leave for extraction and audit."""


@dataclass(frozen=True)
class Limits:
    """Seconds for model, solve and audit together, counted on `clock`, and threads for parts solved side by side."""

    seconds: float
    threads: int
    started: float
    clock: Callable[[], float] = monotonic

    @classmethod
    def of(
        cls, question: Question, now: datetime, *, threads: int = 1, clock: Callable[[], float] = monotonic
    ) -> "Limits":
        """Take the job's time limit, cut so that the answer is there before it is needed."""
        seconds = question.time_limit_seconds
        if question.needed_by is not None:
            seconds = min(seconds, (question.needed_by - now).total_seconds() - SECONDS_TO_HAND_OVER)
        return cls(seconds, threads, clock(), clock)

    def left_to_solve(self) -> float:
        """Give the seconds solvers may still take; at or below zero there is no time left."""
        return self.seconds * (1 - AUDIT_SHARE) - (self.clock() - self.started)

    def left_to_hand_over(self) -> float:
        """Give the seconds in which what is in hand may still be made a schedule, half of what solvers leave."""
        return self.seconds * (1 - AUDIT_SHARE / 2) - (self.clock() - self.started)


class Watch(Protocol):
    """Who is told how far a plan has come, and may ask it to stop; whether it ever will is `is_stoppable`."""

    @property
    def is_stoppable(self) -> bool:
        """Tell whether `solving` is worth its price: a solver that can be cancelled calls back all the time."""

    def progress(self, phase: str, done: float) -> None:
        """Take note of a phase and the share of it that is done, 0 to 1."""

    def is_stop_asked(self) -> bool:
        """Tell whether the plan should end with what is in hand."""

    def more_time(self, seconds: float) -> None:
        """Take note that the plan has turned into a diagnosis, which may take so much longer."""

    def solving(self, cancel: Callable[[], None]) -> AbstractContextManager[None]:
        """Hold a way to cancel a solve for as long as it runs; `cancel` may be called from another thread."""


class Unwatched:
    """Nobody watches."""

    is_stoppable = False

    def progress(self, phase: str, done: float) -> None:
        """Let it pass."""

    def is_stop_asked(self) -> bool:
        """Never ask to stop."""
        return False

    def more_time(self, seconds: float) -> None:
        """Let it pass."""

    def solving(self, cancel: Callable[[], None]) -> AbstractContextManager[None]:  # noqa: ARG002
        """Let it run."""
        return nullcontext()


class StoppableWatch(Unwatched):
    """Lets another thread stop a plan: running solves are cancelled, new ones are not begun."""

    is_stoppable = True

    def __init__(self) -> None:
        self._lock = Lock()
        self._running: dict[int, Callable[[], None]] = {}
        self._stopped = False

    def ask_stop(self) -> None:
        """Ask the plan to end with what is in hand."""
        with self._lock:
            self._stopped = True
            for cancel in self._running.values():
                cancel()

    def is_stop_asked(self) -> bool:
        """Tell whether `ask_stop` was called."""
        return self._stopped

    @contextmanager
    def solving(self, cancel: Callable[[], None]) -> Iterator[None]:
        """Hold `cancel` while a solve runs; one that begins after the stop is cancelled at once."""
        ticket = id(cancel)
        with self._lock:
            self._running[ticket] = cancel
            if self._stopped:
                cancel()
        try:
            yield
        finally:
            with self._lock:
                del self._running[ticket]
