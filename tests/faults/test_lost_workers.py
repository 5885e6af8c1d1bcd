"""A worker dies in the middle of a job; the job does not."""

import os
import signal
import subprocess
from functools import partial
from pathlib import Path

import pytest

from tests.faults import jobs
from tests.faults.deployment import Deployment, is_gone

RETURNED_SECONDS = 15.0
"""From the loss of a worker to the next attempt: the promise; about eight are the lease."""


def busy(house: Deployment, job_id: str, *workers: subprocess.Popen[bytes]) -> subprocess.Popen[bytes]:
    """Give the worker that has the job."""
    house.running(job_id)
    return house.until(lambda: next((worker for worker in workers if _has_a_horse(worker)), None), "a worker is busy")


def _has_begun(house: Deployment, job_id: str, attempt: int) -> bool:
    record = house.jobs.job(job_id)
    return (record.attempt, record.state) == (attempt, "running")


def _has_a_horse(worker: subprocess.Popen[bytes]) -> bool:
    return bool(Path(f"/proc/{worker.pid}/task/{worker.pid}/children").read_text(encoding="ascii").split())


def test_a_job_whose_worker_was_killed_is_done_by_another_once(house: Deployment) -> None:
    workers = [house.worker(), house.worker()]
    house.keeper()
    job_id = house.jobs.submit(jobs.long(12)).record.id
    victim = busy(house, job_id, *workers)
    horse = house.solving(job_id, victim)
    os.kill(victim.pid, signal.SIGKILL)
    house.until(lambda: is_gone(horse), "the work-horse goes with its worker", 5)
    house.until(lambda: house.jobs.job(job_id).attempt == 2, "the second attempt begins", RETURNED_SECONDS)
    record = house.ended(job_id)
    assert (record.state, record.attempt, record.tries_left, record.carrier) == ("finished", 2, 2, 2)
    assert record.answer is not None
    assert house.client.zcard(house.keys.started) == 0


def test_a_job_whose_process_was_killed_is_tried_three_times_and_fails_with_how_it_died(house: Deployment) -> None:
    worker = house.worker()
    house.keeper()
    job_id = house.jobs.submit(jobs.long()).record.id
    for attempt in (1, 2, 3):
        house.until(partial(_has_begun, house, job_id, attempt), "the next attempt begins")
        os.kill(house.horse_of(worker), signal.SIGKILL)
    record = house.ended(job_id)
    assert record.state == "failed"
    assert record.error is not None
    assert record.error.reason == "worker-lost"
    assert "signal 9" in record.error.detail
    assert worker.poll() is None
    after = house.jobs.submit(jobs.small()).record.id
    assert house.ended(after).state == "finished"


def test_a_worker_told_to_stop_gives_its_job_back_at_no_cost(house: Deployment) -> None:
    worker = house.worker()
    house.keeper()
    job_id = house.jobs.submit(jobs.long(20)).record.id
    house.solving(job_id, worker)
    worker.terminate()
    assert worker.wait(20) == 0
    house.until(lambda: house.jobs.job(job_id).queue_position == 1, "it is back in its queue", 10)
    record = house.jobs.job(job_id)
    assert (record.state, record.attempt, record.tries_left) == ("queued", 1, 3)


def test_a_job_that_ends_within_the_grace_is_not_given_back(house: Deployment) -> None:
    worker = house.worker(HOURWRIGHT_GRACE_SECONDS="60")
    job_id = house.jobs.submit(jobs.long(3)).record.id
    house.running(job_id)
    worker.terminate()
    record = house.ended(job_id)
    assert (record.state, record.attempt) == ("finished", 1)
    assert worker.wait(20) == 0


def test_an_urgent_job_does_not_wait_behind_others(house: Deployment) -> None:
    ordinary = house.worker()
    house.worker("urgent")
    house.solving(house.jobs.submit(jobs.long()).record.id, ordinary)
    waiting = house.jobs.submit(jobs.small()).record
    urgent = house.jobs.submit(jobs.small(urgent=True)).record
    assert house.ended(urgent.id).state == "finished"
    assert house.jobs.job(waiting.id).state == "queued"


@pytest.mark.full
def test_a_worker_that_was_paused_and_taken_for_dead_writes_nothing_when_it_wakes(house: Deployment) -> None:
    workers = [house.worker(), house.worker()]
    house.keeper()
    job_id = house.jobs.submit(jobs.long(20)).record.id
    paused = busy(house, job_id, *workers)
    horse = house.solving(job_id, paused)
    for pid in (paused.pid, horse):
        os.kill(pid, signal.SIGSTOP)
    house.until(lambda: house.jobs.job(job_id).attempt == 2, "the second attempt begins", RETURNED_SECONDS)
    for pid in (paused.pid, horse):
        os.kill(pid, signal.SIGCONT)
    house.until(lambda: is_gone(horse), "the first attempt sees that it is no longer wanted", 10)
    assert house.jobs.job(job_id).state == "running"
    record = house.ended(job_id)
    assert (record.state, record.attempt, record.tries_left) == ("finished", 2, 2)
    assert [worker.poll() for worker in workers] == [None, None]


@pytest.mark.full
@pytest.mark.parametrize(
    "plan",
    ["time.sleep(1000)", "ctypes.PyDLL(None).sleep(1000)"],
    ids=["native code", "native code that lets nothing else run"],
)
def test_a_plan_that_ignores_its_limit_fails_its_job_once_and_frees_the_worker(house: Deployment, plan: str) -> None:
    prelude = f"import ctypes, time, workers.tasks; workers.tasks.plan = lambda *_: {plan}"
    worker = house.worker(prelude=prelude)
    job_id = house.jobs.submit(jobs.small(time_limit_seconds=1)).record.id
    record = house.ended(job_id, 1 + 10 + 12)
    assert (record.state, record.attempt) == ("failed", 1)
    assert record.error is not None
    assert record.error.reason == "time-limit-ignored"
    after = house.jobs.submit(jobs.small()).record.id
    house.running(after)
    assert worker.poll() is None
