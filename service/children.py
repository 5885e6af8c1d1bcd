"""Processes that one process looks after: each a direct child, started again when it ends, gone when its parent is."""

import logging
import os
import signal
import subprocess
import sys
from collections.abc import Callable, Mapping, Sequence
from time import monotonic

log = logging.getLogger(__name__)

FIRST_WAIT_SECONDS = 0.5
LONGEST_WAIT_SECONDS = 30.0
SETTLED_SECONDS = 10.0
"""A child that lived so long had started well; the next restart comes at once."""


_TIE = """
import ctypes, os, signal, sys
parent, number, *command = sys.argv[1:]
signal.pthread_sigmask(signal.SIG_SETMASK, ())
os.setpgid(0, 0)
PR_SET_PDEATHSIG = 1
if ctypes.CDLL(None).prctl(PR_SET_PDEATHSIG, int(number)) != 0 or os.getppid() != int(parent):
    os._exit(1)
os.execv(command[0], command)
"""


def tied(command: Sequence[str], number: signal.Signals) -> list[str]:
    """Return a command line that becomes this command, hears all signals, and gets this one when its parent dies.

    Linux, prctl(2): the wish survives the start of another program. Done in a small program of its own, not between
    fork and exec in this process, which may have threads. It leaves the process group of its parent: an interrupt from
    the terminal is for the parent, which ends its children in their order, Redis last.
    """
    return [sys.executable, "-I", "-S", "-c", _TIE, str(os.getpid()), str(int(number)), *command]


class Child:
    """A command that should be running."""

    def __init__(
        self,
        name: str,
        command: Sequence[str],
        environment: Mapping[str, str],
        clock: Callable[[], float] = monotonic,
    ) -> None:
        self.name = name
        self.failures_in_a_row = 0
        self._command = list(command)
        self._environment = dict(environment)
        self._clock = clock
        self._process: subprocess.Popen[bytes] | None = None
        self._started = clock()
        self._not_before = clock()

    @property
    def pid(self) -> int | None:
        """Give the process id while it runs."""
        return self._process.pid if self._process is not None and self._process.poll() is None else None

    def start(self) -> None:
        """Start the command; it is killed when this process dies, since what it does is made for being killed."""
        self._started = self._clock()
        self._process = subprocess.Popen(
            tied(self._command, signal.SIGKILL), env=self._environment, stdin=subprocess.DEVNULL
        )

    def look_after(self) -> None:
        """Start it again where it has ended, whatever its status, later each time that it ends early."""
        if self.pid is not None:
            return
        if self._process is not None:
            lived = self._clock() - self._started
            self.failures_in_a_row = 0 if lived >= SETTLED_SECONDS else self.failures_in_a_row + 1
            wait = FIRST_WAIT_SECONDS * 2 ** max(0, self.failures_in_a_row - 1)
            self._not_before = self._clock() + min(wait, LONGEST_WAIT_SECONDS)
            log.warning("%s ended with status %s after %.1f s", self.name, self._process.returncode, lived)
            self._process = None
        if self._clock() >= self._not_before:
            self.start()

    def ask_to_stop(self) -> None:
        """Send SIGTERM."""
        if self.pid is not None and self._process is not None:
            self._process.terminate()

    def await_end(self, seconds: float) -> None:
        """Wait for it to end, and kill it when it does not."""
        if self._process is None:
            return
        try:
            self._process.wait(max(seconds, 0.0))
        except subprocess.TimeoutExpired:
            log.warning("%s does not stop and is killed", self.name)
            self._process.kill()
            self._process.wait()
