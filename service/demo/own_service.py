"""A whole service for one's own use: started on a free port of this machine, and gone afterwards."""

import os
import signal
import socket
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from threading import Event
from time import monotonic
from types import FrameType

from service.calling import Api
from service.children import tied
from service.settings import PREFIX

HOST = "127.0.0.1"
READY_SECONDS = 120.0
STOP_SECONDS = 60.0
GLANCE_SECONDS = 0.05
LAST_WORDS_LINES = 5
ENDING = (signal.SIGINT, signal.SIGTERM, signal.SIGHUP)


class ServiceFault(RuntimeError):  # noqa: N818 - says what it is
    """The service did not start, or did not end as it should; the message has its last words."""


@contextmanager
def own_service(*options: str) -> Iterator[Api]:
    """Run `hourwright up` in a folder of its own, which only this user can read, until the block is left.

    Ready when it is given; stopped, with all of its processes, and its folder removed, however the block is left.
    Should this process be killed, the service hears SIGTERM from the kernel. Settings of the surroundings do not count.
    Raises ServiceFault.
    """
    with tempfile.TemporaryDirectory(prefix="hourwright-own-", ignore_cleanup_errors=True) as folder:
        api = Api(HOST, free_port())
        said = Path(folder) / "said"
        process = _started(Path(folder) / "data", api.port, said, options)
        try:
            _await_ready(api, process, said)
            yield api
        finally:
            _stop(process)
        if process.returncode != 0:
            raise ServiceFault(f"the service ended with status {process.returncode}: {_last_words(said)}")


def free_port() -> int:
    """Ask the system for a port that nobody listens on just now."""
    with socket.socket() as asked:
        asked.bind((HOST, 0))
        return int(asked.getsockname()[1])


@contextmanager
def ended_by_signals() -> Iterator[None]:
    """Within the block, let SIGTERM and SIGHUP end this process as an exception does: all blocks are left in order."""

    def leave(number: int, _frame: FrameType | None) -> None:
        raise SystemExit(128 + number)

    heard = [number for number in (signal.SIGTERM, signal.SIGHUP) if signal.getsignal(number) is not signal.SIG_IGN]
    before = {number: signal.signal(number, leave) for number in heard}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def _started(data: Path, port: int, said: Path, options: tuple[str, ...]) -> subprocess.Popen[bytes]:
    command = [sys.executable, "-I", "-m", "service", "up", "--data", str(data), "--host", HOST, "--port", str(port)]
    surroundings = {name: value for name, value in os.environ.items() if not name.upper().startswith(PREFIX)}
    with said.open("wb") as words:
        return subprocess.Popen(
            tied([*command, "--no-auth", *options], signal.SIGTERM),
            env=surroundings,
            stdin=subprocess.DEVNULL,
            stdout=words,
            stderr=words,
        )


def _await_ready(api: Api, process: subprocess.Popen[bytes], said: Path) -> None:
    until = monotonic() + READY_SECONDS
    while not api.is_ready():
        if process.poll() is not None:
            raise ServiceFault(f"the service did not start (status {process.returncode}): {_last_words(said)}")
        if monotonic() > until:
            raise ServiceFault(f"the service is not ready after {READY_SECONDS:g} s: {_last_words(said)}")
        Event().wait(GLANCE_SECONDS)


def _stop(process: subprocess.Popen[bytes]) -> None:
    """Stop the service and wait for its end, which a second signal to this process does not cut short."""
    before = {number: signal.signal(number, signal.SIG_IGN) for number in ENDING}
    try:
        process.terminate()
        try:
            process.wait(STOP_SECONDS)
        except subprocess.TimeoutExpired:
            process.kill()  # its children are tied to it
            process.wait()
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def _last_words(said: Path) -> str:
    lines = said.read_text(encoding="utf-8", errors="replace").splitlines()
    return "\n".join(lines[-LAST_WORDS_LINES:]) or "it said nothing"
