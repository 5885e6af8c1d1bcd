"""A watch for solves within a solve."""

from collections.abc import Callable
from contextlib import AbstractContextManager

from workers.planning.limits import Unwatched, Watch


class Quiet(Unwatched):
    """Passes on the wish to stop, and keeps the progress of each single solve to itself."""

    def __init__(self, watch: Watch) -> None:
        self._watch = watch
        self.is_stoppable = watch.is_stoppable

    def is_stop_asked(self) -> bool:
        """Tell whether the plan should end with what is in hand."""
        return self._watch.is_stop_asked()

    def solving(self, cancel: Callable[[], None]) -> AbstractContextManager[None]:
        """Hold a way to cancel a solve for as long as it runs."""
        return self._watch.solving(cancel)
