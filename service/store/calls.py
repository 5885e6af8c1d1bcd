"""Calls to Redis on behalf of a caller: what Redis says in its words becomes what the store says in ours."""

from collections.abc import Iterator
from contextlib import contextmanager
from threading import Lock
from time import monotonic
from typing import Any

from redis import Redis, exceptions

from service.store import StoreFull, StoreUnreachable

RETRY_WHEN_FULL_SECONDS = 30
MEMORY_KNOWN_SECONDS = 1.0

OUT_OF_REACH = (
    exceptions.ConnectionError,
    exceptions.TimeoutError,
    exceptions.BusyLoadingError,
    exceptions.ReadOnlyError,
)


@contextmanager
def translated() -> Iterator[None]:
    """Raise StoreUnreachable or StoreFull where redis-py raises its own; anything else is a fault of ours."""
    try:
        yield
    except OUT_OF_REACH as fault:
        raise StoreUnreachable(str(fault)) from fault
    except exceptions.ResponseError as fault:
        # Refused within a script, the word does not come first, and redis-py does not make it an OutOfMemoryError.
        if "OOM command not allowed" not in str(fault) and not isinstance(fault, exceptions.OutOfMemoryError):
            raise
        raise StoreFull("the store's memory is full", RETRY_WHEN_FULL_SECONDS) from fault


def text_of(value: Any) -> str:
    """Read what Redis sent as text."""
    return value.decode() if isinstance(value, bytes) else str(value)


class Memory:
    """How full Redis is, asked for at most once a second whatever the number of callers."""

    def __init__(self, redis: "Redis") -> None:
        self._redis = redis
        self._lock = Lock()
        self._known_at = float("-inf")
        self._share: float | None = None

    def share(self) -> float | None:
        """Give the share of its memory that Redis uses; None where it has no limit."""
        with self._lock:
            if monotonic() - self._known_at > MEMORY_KNOWN_SECONDS:
                facts: Any = self._redis.info("memory")
                limit = int(facts["maxmemory"])
                self._share = int(facts["used_memory"]) / limit if limit else None
                self._known_at = monotonic()
            return self._share

    def require_room(self, share: float) -> None:
        """Raise StoreFull where more than this share is in use: an accepted job must still find room for its answer."""
        used = self.share()
        if used is not None and used > share:
            why = f"{used:.0%} of the store's memory are in use, more than the {share:.0%} up to which work is taken"
            raise StoreFull(why, RETRY_WHEN_FULL_SECONDS)
