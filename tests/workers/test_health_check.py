"""The health checks of workers' and keepers' containers look at what those write."""

import os
import socket
import subprocess
import sys
from datetime import UTC, datetime, timedelta

import pytest
from rq import Queue
from rq.utils import utcformat
from rq.worker_registration import WORKERS_BY_QUEUE_KEY

from schemas.records import DEFAULT_PREFIX, Keys, rq_prefix
from tests.faults.deployment import Deployment
from workers.health_check import SEEN_SECONDS, main
from workers.leases import LEASE_SECONDS
from workers.settings import Settings
from workers.worker import HEARTBEAT_SECONDS, PlanningWorker


def test_the_layout_of_keys_is_the_one_that_the_queue_has() -> None:
    assert f"{rq_prefix(DEFAULT_PREFIX)}:workers:jobs" == WORKERS_BY_QUEUE_KEY % "jobs"
    assert SEEN_SECONDS > LEASE_SECONDS > 2 * HEARTBEAT_SECONDS


@pytest.fixture
def around(empty: Deployment, monkeypatch: pytest.MonkeyPatch) -> Deployment:
    """Point the settings of this process at an empty Redis."""
    monkeypatch.setenv("HOURWRIGHT_REDIS_URL", empty.redis.url)
    return empty


@pytest.fixture
def worker(around: Deployment) -> PlanningWorker:
    """Give a worker that has registered, and sent its first heartbeat."""
    worker = PlanningWorker(Queue("jobs", connection=around.client, serializer="json"), around.client, Settings())
    worker.register_birth()  # type: ignore[no-untyped-call]
    worker.heartbeat()
    return worker


def rewrite(worker: PlanningWorker, field: str, value: str) -> None:
    worker.connection.hset(worker.key, field, value)


@pytest.mark.usefixtures("worker")
def test_a_worker_that_sends_heartbeats_is_healthy(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["work"]) == 0
    assert capsys.readouterr().err == ""


@pytest.mark.usefixtures("around")
def test_without_a_worker_it_is_not_healthy(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["work"]) == 1
    assert f"no worker of {socket.gethostname()} on the queue jobs" in capsys.readouterr().err


@pytest.mark.usefixtures("worker")
def test_a_worker_on_another_queue_does_not_count(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("HOURWRIGHT_QUEUE", "urgent")
    assert main(["work"]) == 1


def test_a_worker_of_another_host_does_not_count(worker: PlanningWorker) -> None:
    rewrite(worker, "hostname", "elsewhere")
    assert main(["work"]) == 1


def test_a_worker_that_has_ended_does_not_count(worker: PlanningWorker) -> None:
    rewrite(worker, "death", utcformat(datetime.now(UTC)))
    assert main(["work"]) == 1


@pytest.mark.parametrize(("age_seconds", "status"), [(SEEN_SECONDS - 5, 0), (SEEN_SECONDS + 1, 1)])
def test_a_heartbeat_counts_for_seconds(worker: PlanningWorker, age_seconds: float, status: int) -> None:
    rewrite(worker, "last_heartbeat", utcformat(datetime.now(UTC) - timedelta(seconds=age_seconds)))
    assert main(["work"]) == status


def test_a_keeper_at_work_is_healthy_and_without_one_it_is_not(
    around: Deployment, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["keep"]) == 1
    assert capsys.readouterr().err == "no keeper is at work\n"
    around.client.set(Keys(DEFAULT_PREFIX).keeper, "one", ex=10)
    assert main(["keep"]) == 0


def test_without_redis_it_is_not_healthy(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    monkeypatch.setenv("HOURWRIGHT_REDIS_URL", "unix:///nowhere/redis.sock")
    assert main(["work"]) == 1
    assert capsys.readouterr().err.startswith("Redis: ")


@pytest.mark.parametrize("arguments", [[], ["serve"], ["work", "keep"]])
def test_what_to_look_for_has_to_be_said(arguments: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    assert main(arguments) == 2
    assert capsys.readouterr().err == "which one: work or keep?\n"


def test_real_processes_are_seen(around: Deployment) -> None:
    def status(which: str) -> int:
        command = [sys.executable, "-m", "workers.health_check", which]
        return subprocess.run(command, capture_output=True, check=False, env=dict(os.environ)).returncode

    around.worker()
    around.keeper()
    around.until(lambda: status("keep") == 0, "a keeper is seen")
    assert status("work") == 0
