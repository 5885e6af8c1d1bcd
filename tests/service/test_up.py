"""Everything on one machine: started, used, broken and stopped for real."""

import json
import os
import signal
import socket
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from http.client import HTTPConnection
from pathlib import Path
from threading import Event
from time import monotonic
from typing import Any

import pytest

from service.command_help import OPEN_ON_LOOPBACK_ONLY
from service.up import CannotRun, Wish
from tests.faults import jobs
from tests.faults.deployment import is_gone

ROOT = Path(__file__).resolve().parents[2]
PROGRAM = """
import sys
from pathlib import Path
from service.up import Wish, up
sys.exit(up(Wish(Path(sys.argv[1]), port=int(sys.argv[2]), workers=1, no_auth=True)))
"""


def free_port() -> int:
    with socket.socket() as asked:
        asked.bind(("127.0.0.1", 0))
        return int(asked.getsockname()[1])


def start(data: Path, port: int, errors: Path) -> subprocess.Popen[str]:
    with errors.open("ab") as said:
        return subprocess.Popen(
            [sys.executable, "-c", PROGRAM, str(data), str(port)],
            cwd=ROOT,
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=said,
            text=True,
        )


@contextmanager
def running(data: Path, port: int, errors: Path) -> Iterator[subprocess.Popen[str]]:
    """Run `up` until the API answers, and end it by SIGTERM afterwards if that was not done."""
    process = start(data, port, errors)
    assert process.stdout is not None
    with process.stdout as output:
        try:
            line = output.readline()
            assert f"http://127.0.0.1:{port}" in line, errors.read_text(encoding="utf-8")
            yield process
        finally:
            if process.poll() is None:
                process.terminate()
            process.wait(60)


def asked(port: int, method: str, path: str, body: bytes | None = None, **headers: str) -> tuple[int, Any]:
    connection = HTTPConnection("127.0.0.1", port, timeout=60)
    try:
        connection.request(method, path, body, headers)
        answer = connection.getresponse()
        return answer.status, json.loads(answer.read())
    finally:
        connection.close()


def children(pid: int) -> list[int]:
    return [int(child) for child in Path(f"/proc/{pid}/task/{pid}/children").read_text(encoding="ascii").split()]


def command(pid: int) -> str:
    return Path(f"/proc/{pid}/cmdline").read_bytes().decode().replace("\0", " ")


def test_a_job_is_planned_over_http_survives_a_stop_and_broken_children_come_back(tmp_path: Path) -> None:
    data, port, errors = tmp_path / "data", free_port(), tmp_path / "said"
    submission = {"Content-Type": "application/json", "Prefer": "wait=30"}
    with running(data, port, errors) as process:
        status, job = asked(port, "POST", "/v1/jobs", jobs.small().resolved, **submission)
        assert (status, job["state"], job["outcome"]) == (202, "finished", "optimal"), errors.read_text("utf-8")
        status, schedule = asked(port, "GET", f"/v1/jobs/{job['id']}/schedule")
        assert (status, schedule["assets"][0]["id"]) == (200, "b-0")

        family = children(process.pid)
        commands = [command(pid) for pid in family]
        for part in ("redis-server", "service.serve", "workers.keep_process"):
            assert sum(part in line for line in commands) == 1, commands
        assert sum("workers.work_process" in line for line in commands) == 2, (commands, errors.read_text("utf-8"))

        second = start(data, free_port(), tmp_path / "second")
        assert second.stdout is not None
        second.stdout.close()
        assert second.wait(30) == 2
        assert "is in use by process" in (tmp_path / "second").read_text(encoding="utf-8")

        for victim in family:
            if any(part in command(victim) for part in ("work_process", "redis-server")):
                os.kill(victim, signal.SIGKILL)
        status, again = asked(port, "POST", "/v1/jobs", jobs.small().resolved, **submission)
        until = monotonic() + 60
        while status == 503 and monotonic() < until:  # Redis is on its way back
            Event().wait(0.2)
            status, again = asked(port, "POST", "/v1/jobs", jobs.small().resolved, **submission)
        while again["state"] in ("queued", "running") and monotonic() < until:
            _, again = asked(port, "GET", f"/v1/jobs/{again['id']}", Prefer="wait=10")
        assert again["state"] == "finished", errors.read_text("utf-8")

        family = children(process.pid)
        process.terminate()
        assert process.wait(40) == 0
        assert all(is_gone(pid) for pid in family)
    with running(data, port, errors):
        status, kept = asked(port, "GET", f"/v1/jobs/{job['id']}/schedule")
        assert (status, kept) == (200, schedule)


def test_when_it_is_killed_nothing_of_it_is_left(tmp_path: Path) -> None:
    with running(tmp_path / "data", free_port(), tmp_path / "said") as process:
        family = children(process.pid)
        assert len(family) == 5
        process.kill()
        process.wait(10)
        until = monotonic() + 15
        while not all(is_gone(pid) for pid in family):
            assert monotonic() < until, [command(pid) for pid in family if not is_gone(pid)]
            Event().wait(0.05)
    with running(tmp_path / "data", free_port(), tmp_path / "said"):
        pass  # what was killed left its socket's folder; the next start takes it away


@pytest.mark.parametrize(
    "wish",
    [Wish(Path("x")), Wish(Path("x"), host="0.0.0.0", no_auth=True), Wish(Path("x"), host="example.org", no_auth=True)],
    ids=["with keys", "on every address", "on a name"],
)
def test_it_is_not_run_where_others_could_use_it(wish: Wish) -> None:
    with pytest.raises(CannotRun, match="no API keys yet"):
        wish.require_safe()
    assert "\n" not in OPEN_ON_LOOPBACK_ONLY


@pytest.mark.parametrize("host", ["127.0.0.1", "127.0.0.53", "::1", "localhost"])
def test_it_is_run_on_the_machine_itself(host: str) -> None:
    Wish(Path("x"), host=host, no_auth=True).require_safe()
