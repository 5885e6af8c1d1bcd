"""Nothing is pickled or unpickled on the way to an answer: whoever can write to Redis runs no code by it."""

import os
import pickle
import signal
from pathlib import Path
from typing import Any, NoReturn

import pytest
import rq.serializers
from rq import Queue

from schemas.records import TASK
from tests.faults import jobs
from tests.faults.deployment import Deployment

POISON = """
import pickle
def refuse(*_, **__):
    raise AssertionError("pickle was called")
pickle.loads = pickle.dumps = pickle.load = pickle.dump = refuse
pickle.Pickler = pickle.Unpickler = type("Refusing", (), {"__init__": refuse})
"""


@pytest.fixture
def poisoned(monkeypatch: pytest.MonkeyPatch) -> None:
    """Make pickle raise in this process too, which stands for the API."""

    def refuse(*_: Any, **__: Any) -> NoReturn:
        raise AssertionError("pickle was called")

    for name in ("loads", "dumps", "load", "dump"):
        monkeypatch.setattr(pickle, name, refuse)
    for name in ("loads", "dumps"):
        monkeypatch.setattr(rq.serializers.DefaultSerializer, name, refuse)


@pytest.mark.usefixtures("poisoned")
def test_every_way_a_job_can_end_works_with_pickle_poisoned_in_every_process(house: Deployment) -> None:
    worker = house.worker(prelude=POISON)
    house.keeper(prelude=POISON)
    planned = house.jobs.submit(jobs.small()).record.id
    impossible = house.jobs.submit(jobs.impossible()).record.id
    assert house.ended(planned).state == "finished"
    assert len(list(house.jobs.schedule(planned).assets)) == 1
    assert house.ended(impossible).outcome == "infeasible"
    killed = house.jobs.submit(jobs.long(30)).record.id
    horse = house.solving(killed, worker)
    os.kill(horse, signal.SIGKILL)
    house.until(lambda: house.jobs.job(killed).attempt == 2, "the keeper returns it", 15)
    house.jobs.cancel(killed)
    assert house.ended(killed).state == "cancelled"
    assert house.jobs.health().keeper_seen
    assert "pickle was called" not in house.said()


class Planted:
    """What an intruder would plant: unpickling it makes a file."""

    def __init__(self, mark: Path) -> None:
        self._mark = mark

    def __reduce__(self) -> tuple[Any, ...]:
        return Path.touch, (self._mark,)


def test_a_planted_pickle_is_not_executed_and_its_carrier_fails(house: Deployment, tmp_path: Path) -> None:
    mark = tmp_path / "executed"
    payload = pickle.dumps(Planted(mark))
    pickle.loads(payload)  # noqa: S301 - that it would execute
    assert mark.exists()
    mark.unlink()
    worker = house.worker()
    queue = Queue("jobs", connection=house.client, serializer="json")
    planted = queue.enqueue(TASK, "job-x", job_id="job-x-1")
    house.until(lambda: not house.client.exists(planted.key), "the first carrier, of no job, is done with")
    planted.save()
    house.client.hset(planted.key, mapping={"data": payload, "meta": payload, "created_at": "2027-01-01T00:00:00Z"})
    house.client.rpush(queue.key, planted.id)
    house.until(lambda: not house.client.exists(planted.key), "the planted carrier is done with")
    after = house.jobs.submit(jobs.small()).record.id
    assert house.ended(after).state == "finished"
    assert not mark.exists()
    assert worker.poll() is None
