"""A Redis of one's own: its files in a folder, no port, a socket that only this user can reach.

Its append-only file keeps what was accepted through a crash of this program or of Redis; a crash of the machine can
cost the last second or two.
"""

import fcntl
import os
import shutil
import signal
import subprocess
import tempfile
from contextlib import suppress
from pathlib import Path
from threading import Event
from time import monotonic

from redis import Redis
from redis.backoff import NoBackoff
from redis.exceptions import RedisError
from redis.retry import Retry

from service.children import tied
from service.redis_server import RedisServer

LONGEST_SOCKET_PATH_BYTES = 100
"""Linux takes 107."""

RUNTIME_PREFIX = "hourwright-"

START_SECONDS = 60.0
STOP_SECONDS = 30.0
FREED_SECONDS = 15.0
"""So long the folder may be held by a Redis that is just ending, after the program that started it was killed."""

MEMORY_SHARE = 4
"""Redis may use one part in so many of the machine's memory."""

LEAST_MEMORY_BYTES = 256 * 2**20


class DataInUse(RuntimeError):  # noqa: N818 - says what it is
    """Another process runs on this folder."""


class RedisDidNotStart(RuntimeError):  # noqa: N818 - says what it is
    """The server ended, or did not answer in time; the message has its last words."""


class DataFolder:
    """The folder of one deployment, held by a lock for as long as this process or its Redis lives."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.redis_folder = folder / "redis"
        self._lock: int | None = None

    @property
    def lock_descriptor(self) -> int:
        """Give the open lock, to be inherited by the one child that must not outlive it unseen."""
        if self._lock is None:
            raise RuntimeError("the folder is not held")
        return self._lock

    def hold(self) -> None:
        """Make the folder if need be, and take its lock; raises DataInUse."""
        self.folder.mkdir(parents=True, exist_ok=True, mode=0o700)
        self.redis_folder.mkdir(exist_ok=True, mode=0o700)
        self.redis_folder.chmod(0o700)
        lock = os.open(self.folder / "lock", os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o600)
        until = monotonic() + FREED_SECONDS
        while not _locked(lock):
            if (owner := _owner(lock)) is None or _is_alive(owner) or monotonic() > until:
                os.close(lock)
                who = f"process {owner}" if owner else "another process"
                raise DataInUse(f"{self.folder} is in use by {who}; one deployment at a time runs on a folder")
            Event().wait(0.1)
        os.ftruncate(lock, 0)
        os.pwrite(lock, f"{os.getpid()}\n".encode(), 0)
        self._lock = lock

    def release(self) -> None:
        """Let the lock go."""
        if self._lock is not None:
            os.close(self._lock)
            self._lock = None


def _locked(descriptor: int) -> bool:
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError:
        return False
    return True


def _owner(descriptor: int) -> int | None:
    text = os.pread(descriptor, 32, 0).strip()
    return int(text) if text.isdigit() else None


def _is_alive(pid: int) -> bool:
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    except PermissionError:
        return True
    # One that was killed and not yet waited for is no owner any more.
    with suppress(OSError):
        return Path(f"/proc/{pid}/stat").read_text(encoding="utf-8").rpartition(")")[2].split()[0] != "Z"
    return True


class EmbeddedRedis:
    """A server process on a held folder; started again by whoever looks after it."""

    def __init__(self, data: DataFolder, server: RedisServer, memory_bytes: int | None = None) -> None:
        self._data = data
        self._server = server
        self._memory_bytes = memory_bytes or max(LEAST_MEMORY_BYTES, _memory_of_machine() // MEMORY_SHARE)
        self._runtime = _runtime_folder(data.folder / "socket-folder")
        self.socket = self._runtime / "redis.sock"
        self.process: subprocess.Popen[bytes] | None = None

    @property
    def url(self) -> str:
        """Give the address of the socket."""
        return f"unix://{self.socket}"

    def command(self) -> list[str]:
        """Give the command line; nothing is read from a configuration file."""
        options = {
            "port": "0",
            "unixsocket": str(self.socket),
            "unixsocketperm": "700",
            "dir": str(self._data.redis_folder),
            "appendonly": "yes",
            "appendfsync": "everysec",
            "save": "",
            "maxmemory": str(self._memory_bytes),
            "maxmemory-policy": "noeviction",
            "logfile": str(self._data.redis_folder / "redis.log"),
            "daemonize": "no",
        }
        return [str(self._server.program), *(part for name, value in options.items() for part in (f"--{name}", value))]

    def start(self) -> None:
        """Start the server and wait until it has loaded its file; raises RedisDidNotStart."""
        # The lock goes with it: a folder is free when its Redis has ended, not when the program that started it has.
        self.process = subprocess.Popen(
            tied(self.command(), signal.SIGTERM),
            stdin=subprocess.DEVNULL,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
            pass_fds=[self._data.lock_descriptor],
        )
        self.await_ready()

    def await_ready(self) -> None:
        """Wait until the server answers and has loaded its file."""
        until = monotonic() + START_SECONDS
        with Redis(unix_socket_path=str(self.socket), retry=Retry(NoBackoff(), 0)) as asked:
            while not _answers(asked):
                if self.process is None or self.process.poll() is not None:
                    raise RedisDidNotStart(f"{self._server} ended at once: {self._last_words()}")
                if monotonic() > until:
                    raise RedisDidNotStart(f"{self._server} does not answer: {self._last_words()}")
                Event().wait(0.02)

    def stop(self) -> None:
        """End the server, which writes out what it holds, and remove the socket's folder."""
        if self.process is not None and self.process.poll() is None:
            self.process.terminate()
            try:
                self.process.wait(STOP_SECONDS)
            except subprocess.TimeoutExpired:
                self.process.kill()
                self.process.wait()
        shutil.rmtree(self._runtime, ignore_errors=True)

    def _last_words(self) -> str:
        log = self._data.redis_folder / "redis.log"
        lines = log.read_text(encoding="utf-8", errors="replace").splitlines() if log.exists() else []
        return lines[-1] if lines else "it said nothing"


def _answers(redis: "Redis") -> bool:
    try:
        return bool(redis.ping())
    except RedisError:  # not there yet, or still loading
        return False


def _runtime_folder(note: Path) -> Path:
    """Make a short folder for this user alone, and remove the one that a program which was killed has left behind."""
    if note.exists():
        left = Path(note.read_text(encoding="utf-8"))
        if left.name.startswith(RUNTIME_PREFIX):
            shutil.rmtree(left, ignore_errors=True)
    made = Path(tempfile.mkdtemp(prefix=RUNTIME_PREFIX, dir=_runtime_parent()))
    note.write_text(str(made), encoding="utf-8")
    return made


def _runtime_parent() -> str:
    """Choose a short folder that exists: a socket's path may be 107 bytes long."""
    for folder in (os.environ.get("XDG_RUNTIME_DIR", ""), tempfile.gettempdir()):
        if folder and os.access(folder, os.W_OK) and len(os.fsencode(folder)) + 32 <= LONGEST_SOCKET_PATH_BYTES:
            return folder
    return "/tmp"


def _memory_of_machine() -> int:
    return os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")
