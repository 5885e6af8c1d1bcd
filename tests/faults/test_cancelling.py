"""A job that a solver is deep in ends when its caller wants it to."""

import subprocess
from contextlib import suppress
from time import monotonic

import pytest

from service.store import AlreadyEnded
from tests.faults import jobs
from tests.faults.deployment import Deployment

CANCELLED_SECONDS = 3.0
"""The contract's promise."""


@pytest.mark.parametrize("times", [2, pytest.param(20, marks=pytest.mark.full)])
def test_cancelling_in_the_solver_ends_the_job_and_not_the_worker(house: Deployment, times: int) -> None:
    worker = house.worker()
    for _ in range(times):
        job_id = house.jobs.submit(jobs.long()).record.id
        house.solving(job_id, worker)
        assert house.jobs.cancel(job_id).state in ("cancelling", "cancelled")  # as it was when the answer was written
        assert house.jobs.wait(job_id, CANCELLED_SECONDS).state == "cancelled"
        assert house.jobs.cancel(job_id).state == "cancelled"
    assert worker.poll() is None
    _still_works(house, worker)


def test_keeping_the_best_hands_over_a_schedule_and_its_bound(house: Deployment) -> None:
    worker = house.worker()
    job_id = house.jobs.submit(jobs.long(60)).record.id
    house.solving(job_id, worker)
    assert house.jobs.cancel(job_id, keep_best=True).state == "cancelling"
    record = house.ended(job_id, 15)
    assert (record.state, record.outcome, record.answer) == ("finished", "feasible", "schedule")
    parts = house.jobs.schedule(job_id)
    assert parts.head["verification"]["violations"] == []
    assert parts.head["margin_bound"] >= parts.head["margin"]
    assert len(list(parts.assets)) == 20
    _still_works(house, worker)


def test_a_job_cancelled_as_it_is_begun_ends_one_way_or_the_other(house: Deployment) -> None:
    worker = house.worker()
    states = set()
    for number in range(10):
        job_id = house.jobs.submit(jobs.small()).record.id
        until = monotonic() + 0.004 * number
        while monotonic() < until and house.jobs.job(job_id).state == "queued":
            pass
        with suppress(AlreadyEnded):
            house.jobs.cancel(job_id)
        record = house.ended(job_id, 10)
        states.add(record.state)
        assert (record.answer is not None) == (record.state == "finished")
    assert states <= {"cancelled", "finished"}
    _still_works(house, worker)


def _still_works(house: Deployment, worker: subprocess.Popen[bytes]) -> None:
    job_id = house.jobs.submit(jobs.small()).record.id
    assert house.ended(job_id).state == "finished"
    assert worker.poll() is None
    assert house.client.zcard(house.keys.started) == 0
