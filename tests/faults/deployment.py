"""A deployment of one's own for a test: a real Redis in a folder, real workers and keepers, ended by their ids."""

import os
import signal
import subprocess
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from threading import Event
from time import monotonic
from typing import TypeVar

from schemas.records import JobRecord, Keys
from service.connection import connect
from service.embedded_redis import DataFolder, EmbeddedRedis
from service.redis_server import find_server
from service.settings import Settings
from service.store.documents import RedisDocumentStore
from service.store.jobs import RedisJobStore

T = TypeVar("T")

GRACE_SECONDS = 1.0
SOLVING_SECONDS = 1.5
"""Processor time after which a long job has built its model and is in native code."""


class Deployment:
    """Redis, the stores that the API would use, and whatever processes a test starts."""

    def __init__(self, folder: Path, memory_bytes: int | None = None, **settings: object) -> None:
        self.folder = folder
        self.data = DataFolder(folder / "data")
        self.data.hold()
        self.redis = EmbeddedRedis(self.data, find_server(), memory_bytes or 256 * 2**20)
        self.redis.start()
        self.settings = Settings.model_validate({"redis_url": self.redis.url, **settings})
        self.client = connect(self.redis.url)
        self.jobs = RedisJobStore(self.client, self.settings)
        self.documents = RedisDocumentStore(self.client, self.settings)
        self.keys = Keys(self.settings.key_prefix)
        self._processes: list[subprocess.Popen[bytes]] = []
        self._started = 0

    def worker(self, queue: str = "jobs", prelude: str = "", **environment: str) -> subprocess.Popen[bytes]:
        """Start a worker, and wait until it is listening; `prelude` is Python that it runs before its own."""
        before = len(self.jobs.health().workers)
        process = self._start("workers.work_process", prelude, HOURWRIGHT_QUEUE=queue, **environment)
        self.until(lambda: len(self.jobs.health().workers) > before or process.poll() is not None, "a worker listens")
        assert process.poll() is None, self.said()
        return process

    def keeper(self, prelude: str = "", **environment: str) -> subprocess.Popen[bytes]:
        """Start a keeper."""
        return self._start("workers.keep_process", prelude, **environment)

    @contextmanager
    def no_room(self) -> Iterator[Callable[[], None]]:
        """Let Redis take nothing more in; what is given back ends that early."""
        limit = str(self.client.config_get("maxmemory")["maxmemory"])

        def make_room() -> None:
            self.client.config_set("maxmemory", limit)

        self.client.config_set("maxmemory", 1)
        try:
            yield make_room
        finally:
            make_room()

    def ended(self, job_id: str, seconds: float = 60.0) -> JobRecord:
        """Wait for a job's end, and fail if it does not come."""
        until = monotonic() + seconds
        while (record := self.jobs.wait(job_id, min(5.0, max(0.0, until - monotonic())))).is_live:
            assert monotonic() < until, f"{record!r}\n{self.said()}"
        return record

    def solving(self, job_id: str, worker: subprocess.Popen[bytes]) -> int:
        """Wait until a worker is deep in the solving of a long job, and give the process in which it is."""
        self.running(job_id)
        horse = self.horse_of(worker)
        self.until(lambda: cpu_seconds(horse) > SOLVING_SECONDS, "it is deep in the solver")
        return horse

    def running(self, job_id: str) -> JobRecord:
        """Wait until a worker has begun a job."""
        return self.until(lambda: record if (record := self.jobs.job(job_id)).state == "running" else None, "it runs")

    def until(self, is_so: Callable[[], T | None], what: str, seconds: float = 30.0) -> T:
        """Ask again and again until there is something to give back."""
        end = monotonic() + seconds
        while not (found := is_so()):
            assert monotonic() < end, f"not in {seconds:g} s: {what}\n{self.said()}"
            Event().wait(0.02)
        return found

    def said(self) -> str:
        """Give what the processes have written to standard error."""
        return "\n".join(
            f"--- {file.name}\n{file.read_text(encoding='utf-8', errors='replace')}"
            for file in sorted(self.folder.glob("*.err"))
        )

    def horse_of(self, worker: subprocess.Popen[bytes]) -> int:
        """Give the process in which a worker has its job run."""
        children = Path(f"/proc/{worker.pid}/task/{worker.pid}/children")
        return int(self.until(lambda: children.read_text(encoding="ascii").split(), "it has a work-horse")[0])

    def close(self) -> None:
        """End everything that was started here, by its id."""
        for process in self._processes:
            if process.poll() is None:
                process.send_signal(signal.SIGCONT)
                process.kill()
        for process in self._processes:
            process.wait(30)
        self.client.close()
        self.redis.stop()
        self.data.release()

    def _start(self, module: str, prelude: str, **environment: str) -> subprocess.Popen[bytes]:
        self._started += 1
        surroundings = {
            **{name: value for name, value in os.environ.items() if not name.startswith("HOURWRIGHT_")},
            "HOURWRIGHT_REDIS_URL": self.redis.url,
            "HOURWRIGHT_GRACE_SECONDS": str(GRACE_SECONDS),
            "OPENBLAS_NUM_THREADS": "1",
            "OMP_NUM_THREADS": "1",
            **environment,
        }
        how = ["-c", f"{prelude}\nimport runpy; runpy.run_module('{module}', run_name='__main__')"] if prelude else []
        with (self.folder / f"{self._started:02}-{module}.err").open("wb") as errors:
            process = subprocess.Popen(
                [sys.executable, "-I", *(how or ["-m", module])],
                env=surroundings,
                stdin=subprocess.DEVNULL,
                stderr=errors,
            )
        self._processes.append(process)
        return process


def cpu_seconds(pid: int) -> float:
    """Give the processor time that a process has taken."""
    fields = Path(f"/proc/{pid}/stat").read_text(encoding="ascii").rpartition(")")[2].split()
    return (int(fields[11]) + int(fields[12])) / os.sysconf("SC_CLK_TCK")


def is_gone(pid: int) -> bool:
    """Tell whether a process has ended."""
    with suppress(FileNotFoundError, ProcessLookupError):
        return Path(f"/proc/{pid}/stat").read_text(encoding="ascii").rpartition(")")[2].split()[0] == "Z"
    return True
