"""The keeper returns what was lost, once, and touches nothing that lives."""

from collections.abc import Callable
from threading import Thread
from typing import Any

import pytest
from rq import Queue
from rq.executions import Execution
from rq.job import Job

from schemas.records import JobRecord, carrier_name
from service.store import JobForgotten
from service.store.jobs import RedisJobStore
from tests.faults import jobs
from tests.faults.clocks import HandClock
from tests.faults.deployment import Deployment
from workers.attempts import claim
from workers.keeper import LOCK_SECONDS, ON_THE_WAY_SECONDS, Keeper
from workers.leases import LEASE_SECONDS


@pytest.fixture
def clock() -> HandClock:
    return HandClock()


@pytest.fixture
def keeper(empty: Deployment, clock: HandClock) -> Keeper:
    return Keeper(empty.client, empty.keys, "one", clock)


def queue_of(house: Deployment, name: str = "jobs") -> Queue:
    return Queue(name, connection=house.client, serializer="json")


def queued(house: Deployment, name: str = "jobs") -> list[str]:
    found: Any = house.client.lrange(queue_of(house, name).key, 0, -1)
    return [entry.decode() for entry in found]


def taken(house: Deployment, record: JobRecord) -> Execution:
    """Take a job from its queue as a worker does before it forks: on the way, then held with a heartbeat."""
    queue = queue_of(house, record.queue)
    house.client.lmove(queue.key, queue.intermediate_queue_key)
    name = carrier_name(record.id, house.jobs.job(record.id).carrier)
    job = Job.fetch(name, connection=house.client, serializer="json")
    with house.client.pipeline() as pipeline:
        execution = Execution.create(job, LEASE_SECONDS, pipeline)
        pipeline.lrem(queue.intermediate_queue_key, 1, name)
        pipeline.execute()
    return execution


def begun(house: Deployment, record: JobRecord) -> Execution:
    execution = taken(house, record)
    assert claim(house.client, house.keys, execution.job_id) is not None
    return execution


def pass_time(keeper: Keeper, clock: HandClock, seconds: float, each_second: Callable[[], None] = lambda: None) -> None:
    """Let a keeper tick once a second."""
    for _ in range(round(seconds)):
        clock.advance(1.0)
        each_second()
        assert keeper.tick()


def test_a_job_on_a_worker_that_is_heard_of_is_left_alone(empty: Deployment, keeper: Keeper, clock: HandClock) -> None:
    record = empty.jobs.submit(jobs.small()).record
    execution = begun(empty, record)
    beats = iter(range(100))

    def beat() -> None:
        empty.client.zadd(queue_of(empty).started_job_registry.key, {execution.composite_key: next(beats)})

    pass_time(keeper, clock, 30, beat)
    assert empty.jobs.job(record.id).state == "running"
    assert queued(empty) == []


def test_a_job_whose_worker_fell_silent_is_returned_once_when_the_lease_is_over(
    empty: Deployment, keeper: Keeper, clock: HandClock
) -> None:
    record = empty.jobs.submit(jobs.small()).record
    begun(empty, record)
    keeper.tick()
    pass_time(keeper, clock, LEASE_SECONDS - 1)
    assert empty.jobs.job(record.id).state == "running"
    pass_time(keeper, clock, 1)
    now = empty.jobs.job(record.id)
    assert (now.state, now.carrier, now.tries_left) == ("queued", 2, 2)
    assert queued(empty) == [carrier_name(record.id, 2)]
    pass_time(keeper, clock, 20)
    assert queued(empty) == [carrier_name(record.id, 2)]
    assert empty.jobs.job(record.id).tries_left == 2
    assert not empty.client.exists(queue_of(empty).started_job_registry.key, Job.key_for(carrier_name(record.id, 1)))


def test_a_job_whose_worker_saw_its_process_die_is_returned_at_once(empty: Deployment, keeper: Keeper) -> None:
    record = empty.jobs.submit(jobs.small()).record
    execution = begun(empty, record)
    empty.client.zrem(queue_of(empty).started_job_registry.key, execution.composite_key)
    keeper.tick()
    assert queued(empty) == [carrier_name(record.id, 2)]


def test_what_a_worker_took_and_did_not_register_is_returned_after_a_while_at_no_cost(
    empty: Deployment, keeper: Keeper, clock: HandClock
) -> None:
    record = empty.jobs.submit(jobs.small()).record
    queue = queue_of(empty)
    empty.client.lmove(queue.key, queue.intermediate_queue_key)
    keeper.tick()
    pass_time(keeper, clock, ON_THE_WAY_SECONDS - 1)
    assert queued(empty) == []
    pass_time(keeper, clock, 1)
    assert queued(empty) == [carrier_name(record.id, 2)]
    assert empty.jobs.job(record.id).tries_left == 3
    assert empty.client.llen(queue.intermediate_queue_key) == 0


def test_a_job_that_was_accepted_and_not_queued_is_queued(
    empty: Deployment, keeper: Keeper, clock: HandClock, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(RedisJobStore, "_enqueue", lambda *_: None)  # the API dies here
    record = empty.jobs.submit(jobs.small()).record
    urgent = empty.jobs.submit(jobs.small(urgent=True)).record
    pass_time(keeper, clock, 2 * ON_THE_WAY_SECONDS + 2)
    assert queued(empty) == [carrier_name(record.id, 2)]
    assert queued(empty, "urgent") == [carrier_name(urgent.id, 2)]


def test_a_job_that_waits_in_its_queue_is_left_alone(empty: Deployment, keeper: Keeper, clock: HandClock) -> None:
    records = [empty.jobs.submit(jobs.small()).record for _ in range(3)]
    pass_time(keeper, clock, 30)
    assert queued(empty) == [carrier_name(record.id, 1) for record in records]


def test_a_job_that_was_given_back_is_queued_at_the_next_tick(empty: Deployment, keeper: Keeper) -> None:
    record = empty.jobs.submit(jobs.small()).record
    execution = taken(empty, record)
    claimed = claim(empty.client, empty.keys, execution.job_id)
    assert claimed is not None
    claimed.attempt.give_back()
    keeper.tick()
    assert queued(empty) == [carrier_name(record.id, 2)]
    assert empty.jobs.job(record.id).tries_left == 3


def test_two_keepers_and_a_reader_return_a_hundred_lost_jobs_to_a_hundred_entries(empty: Deployment) -> None:
    records = [empty.jobs.submit(jobs.small()).record for _ in range(100)]
    for record in records:
        execution = begun(empty, record)
        empty.client.zrem(queue_of(empty).started_job_registry.key, execution.composite_key)
    keepers = [Keeper(empty.client, empty.keys, name) for name in ("one", "two")]

    def ticks(keeper: Keeper) -> None:
        for _ in range(5):
            # Both past the lock, as when one of them slept through it.
            empty.client.delete(empty.keys.keeper)
            keeper.tick()

    threads = [Thread(target=ticks, args=(keeper,)) for keeper in keepers]
    threads.append(Thread(target=lambda: [empty.jobs.job(record.id) for record in records]))
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(60)
    assert sorted(queued(empty)) == sorted(carrier_name(record.id, 2) for record in records)
    assert {empty.jobs.job(record.id).tries_left for record in records} == {2}


def test_a_second_keeper_stands_by_and_takes_over_when_the_first_is_gone(empty: Deployment) -> None:
    first, second = (Keeper(empty.client, empty.keys, name) for name in ("one", "two"))
    assert first.tick()
    assert not second.tick()
    assert 0 < empty.client.ttl(empty.keys.keeper) <= LOCK_SECONDS
    second.step_down()  # not its lock to leave
    assert not second.tick()
    first.step_down()
    assert second.tick()
    assert not first.tick()


def test_a_keeper_that_slept_judges_nobody_by_what_it_saw_before(
    empty: Deployment, keeper: Keeper, clock: HandClock
) -> None:
    record = empty.jobs.submit(jobs.small()).record
    begun(empty, record)
    keeper.tick()
    clock.advance(60)
    keeper.tick()
    assert empty.jobs.job(record.id).state == "running"


def test_what_has_expired_is_forgotten_with_all_that_belongs_to_it(empty: Deployment, keeper: Keeper) -> None:
    record = empty.jobs.submit(jobs.small()).record
    kept = empty.jobs.submit(jobs.small()).record
    for ended in (record, kept):
        empty.jobs.cancel(ended.id)
    empty.client.zadd(empty.keys.expiring, {record.id: 1})
    keeper.tick()
    with pytest.raises(JobForgotten):
        empty.jobs.job(record.id)
    assert not empty.client.exists(*empty.keys.all_of_job(record.id))
    assert [job.id for job in empty.jobs.jobs().jobs] == [kept.id]


def test_a_cancelled_job_leaves_nothing_behind_in_the_queue(empty: Deployment, keeper: Keeper) -> None:
    record = empty.jobs.submit(jobs.small()).record
    empty.jobs.cancel(record.id)
    keeper.tick()
    assert queued(empty) == []
    assert not empty.client.exists(Job.key_for(carrier_name(record.id, 1)), empty.keys.waiting)
