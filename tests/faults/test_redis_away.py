"""Redis is killed and comes back: what was accepted is still there, and is done once."""

from pathlib import Path

from tests.faults import jobs
from tests.faults.deployment import Deployment


def test_no_accepted_job_is_lost_when_redis_is_killed(house: Deployment) -> None:
    worker = house.worker()
    keeper = house.keeper()
    running = house.jobs.submit(jobs.long(12)).record.id
    house.solving(running, worker)
    waiting = [house.jobs.submit(jobs.small()).record.id for _ in range(20)]
    assert house.redis.process is not None
    house.redis.process.kill()
    house.redis.process.wait(10)
    house.redis.start()
    for job_id in (running, *waiting):
        record = house.ended(job_id)
        assert (record.state, record.attempt) == ("finished", 1)
    assert (worker.poll(), keeper.poll()) == (None, None)


def test_an_answer_found_while_redis_is_away_is_handed_over_when_it_is_back(house: Deployment) -> None:
    worker = house.worker()
    job_id = house.jobs.submit(jobs.long(10)).record.id
    horse = house.solving(job_id, worker)
    assert house.redis.process is not None
    house.redis.process.kill()
    house.redis.process.wait(10)
    house.until(lambda: _is_waiting(horse), "the plan has ended and there is nobody to tell")
    house.redis.start()
    record = house.ended(job_id)
    assert (record.state, record.attempt) == ("finished", 1)
    assert worker.poll() is None


def _is_waiting(pid: int) -> bool:
    """Tell whether a process is down to its main thread."""
    return sum(1 for _ in Path(f"/proc/{pid}/task").iterdir()) == 1
