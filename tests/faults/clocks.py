"""Clocks that a test sets."""


class HandClock:
    """Stands still until it is moved; seconds."""

    def __init__(self) -> None:
        self.now = 1_000.0

    def __call__(self) -> float:
        return self.now

    def advance(self, seconds: float) -> None:
        """Let time pass."""
        self.now += seconds
