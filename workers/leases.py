"""Who is still alive, judged by whether it moves: no clock but the observer's own is read."""

from collections.abc import Callable, Mapping
from time import monotonic

LEASE_SECONDS = 8
"""So long a worker is taken for alive without a heartbeat; it sends one every 2 seconds."""


class Leases:
    """Remembers when each heartbeat last changed.

    A heartbeat is a number that its owner renews. Its value is not read as a time: a worker's clock may be wrong, or be
    set while it works. What has not changed for `seconds` on this observer's clock is dead.
    """

    def __init__(self, seconds: float, clock: Callable[[], float] = monotonic) -> None:
        self._seconds = seconds
        self._clock = clock
        self._seen: dict[str, tuple[float, float]] = {}

    def forget(self) -> None:
        """Begin anew: who could not be watched for a while must not be judged by it."""
        self._seen.clear()

    def dead(self, heartbeats: Mapping[str, float]) -> set[str]:
        """Take the heartbeats of now, and name those that have not moved for too long."""
        now = self._clock()
        self._seen = {
            name: self._seen[name] if name in self._seen and self._seen[name][0] == beat else (beat, now)
            for name, beat in heartbeats.items()
        }
        return {name for name, (_, since) in self._seen.items() if now - since >= self._seconds}
