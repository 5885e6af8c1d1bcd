"""Processes that are looked after: started again, not too often, and gone when their parent is."""

import os
import signal
import subprocess
import sys
from pathlib import Path
from threading import Event
from time import monotonic

from service.children import FIRST_WAIT_SECONDS, LONGEST_WAIT_SECONDS, SETTLED_SECONDS, Child, tied
from tests.faults.clocks import HandClock

SLEEP = [sys.executable, "-c", "import signal; signal.pause()"]
END = [sys.executable, "-c", "pass"]


def ended(child: Child) -> None:
    until = monotonic() + 20
    while child.pid is not None:
        assert monotonic() < until
        Event().wait(0.01)


def test_a_child_that_ends_well_or_badly_is_started_again_later_each_time() -> None:
    clock = HandClock()
    child = Child("one", END, os.environ, clock)
    child.start()
    waits = []
    for _ in range(9):
        ended(child)
        began = clock.now
        child.look_after()
        while child.pid is None and clock.now - began < 2 * LONGEST_WAIT_SECONDS:
            clock.advance(0.25)
            child.look_after()
        waits.append(clock.now - began)
    ended(child)
    assert waits[0] == FIRST_WAIT_SECONDS
    assert waits == sorted(waits)
    assert waits[-1] == LONGEST_WAIT_SECONDS
    assert child.failures_in_a_row == 9


def test_a_child_that_had_settled_is_started_again_soon() -> None:
    clock = HandClock()
    child = Child("one", END, os.environ, clock)
    child.start()
    ended(child)
    clock.advance(SETTLED_SECONDS)
    child.look_after()
    assert child.failures_in_a_row == 0
    clock.advance(FIRST_WAIT_SECONDS)
    child.look_after()
    assert child.pid is not None
    child.await_end(10)


def test_a_child_that_does_not_stop_is_killed() -> None:
    deaf = [sys.executable, "-c", "import signal; signal.signal(15, signal.SIG_IGN); signal.pause()"]
    child = Child("one", deaf, os.environ)
    child.start()
    child.ask_to_stop()
    child.await_end(0.2)
    assert child.pid is None


PARENT = """
import signal, subprocess, sys
from service.children import tied
child = subprocess.Popen(tied([sys.executable, "-c", "import signal; signal.pause()"], signal.SIGKILL))
print(child.pid, flush=True)
signal.pause()
"""


def test_a_child_is_gone_when_its_parent_is_killed() -> None:
    root = Path(__file__).resolve().parents[2]
    parent = subprocess.Popen([sys.executable, "-c", PARENT], cwd=root, stdout=subprocess.PIPE, text=True)
    assert parent.stdout is not None
    with parent.stdout as said:
        child = Path("/proc") / said.readline().strip()
        assert child.exists()
        parent.kill()
        parent.wait(10)
    until = monotonic() + 10
    while child.exists() and "Z" not in (child / "stat").read_text(encoding="ascii").rpartition(")")[2]:
        assert monotonic() < until
        Event().wait(0.01)


def test_a_tied_command_is_the_child_itself_and_hears_signals_that_are_held_back_here() -> None:
    signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGTERM})
    try:
        child = subprocess.Popen(tied(SLEEP, signal.SIGKILL))
    finally:
        signal.pthread_sigmask(signal.SIG_UNBLOCK, {signal.SIGTERM})
    command = Path(f"/proc/{child.pid}/cmdline")
    until = monotonic() + 10
    while b"signal.pause" not in command.read_bytes() or b"prctl" in command.read_bytes():
        assert monotonic() < until
        Event().wait(0.01)
    child.terminate()
    assert child.wait(10) == -signal.SIGTERM
