"""What the worker changes of RQ's, where a process adds nothing."""

import os
import signal
import subprocess
import sys

import pytest
from rq import Queue

from tests.faults.deployment import Deployment
from workers.leases import LEASE_SECONDS
from workers.settings import Settings
from workers.worker import PlanningWorker, how_it_ended


@pytest.fixture
def worker(empty: Deployment) -> PlanningWorker:
    queue = Queue("jobs", connection=empty.client, serializer="json")
    return PlanningWorker(queue, empty.client, Settings())


@pytest.fixture
def sleeper() -> subprocess.Popen[bytes]:
    """Start a process in this one's group, as a work-horse is before it makes its own."""
    return subprocess.Popen([sys.executable, "-c", "import signal; signal.pause()"])


def test_without_a_work_horse_nothing_is_killed(worker: PlanningWorker) -> None:
    worker._horse_pid = 0
    worker.kill_horse()


def test_a_work_horse_still_in_this_group_is_killed_alone(
    worker: PlanningWorker, sleeper: subprocess.Popen[bytes]
) -> None:
    worker._horse_pid = sleeper.pid
    assert os.getpgid(sleeper.pid) == os.getpgid(0)
    worker.kill_horse()
    assert sleeper.wait(10) == -signal.SIGKILL


def test_a_work_horse_that_is_gone_is_no_fault(worker: PlanningWorker, sleeper: subprocess.Popen[bytes]) -> None:
    sleeper.kill()
    sleeper.wait(10)
    worker._horse_pid = sleeper.pid
    worker.kill_horse()


def test_the_lease_is_the_same_however_long_a_job_may_run(worker: PlanningWorker, empty: Deployment) -> None:
    queue = Queue("jobs", connection=empty.client, serializer="json")
    for limit in (1, 100_000, -1):
        assert worker.get_heartbeat_ttl(queue.create_job("x", timeout=limit), 50.0) == LEASE_SECONDS


def test_a_worker_cleans_no_registries(worker: PlanningWorker) -> None:
    assert not worker.should_run_maintenance_tasks


@pytest.mark.parametrize(
    ("status", "words"),
    [
        (signal.SIGKILL, "signal 9, as the kernel does where memory runs out"),
        (signal.SIGSEGV, "signal 11"),
        (1 << 8, "status 1"),
        (None, "killed by its worker"),
    ],
)
def test_how_a_process_ended_is_said_in_words(status: int | None, words: str) -> None:
    assert how_it_ended(status).endswith(words)
