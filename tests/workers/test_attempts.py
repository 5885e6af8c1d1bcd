"""Who may write a job's end: every write of a worker is a compare."""

from collections.abc import Callable

import pytest

from schemas.diagnosis import Diagnosis
from schemas.records import JobRecord, carrier_name
from service.store import NoAnswer
from tests.faults import jobs
from tests.faults.deployment import Deployment
from workers import scripts
from workers.attempts import Attempt, claim
from workers.keeper import MOST_CARRIERS_UNBEGUN


@pytest.fixture
def job(empty: Deployment) -> JobRecord:
    return empty.jobs.submit(jobs.small()).record


def begun(house: Deployment, record: JobRecord) -> Attempt:
    claimed = claim(house.client, house.keys, carrier_name(record.id, house.jobs.job(record.id).carrier))
    assert claimed is not None
    return claimed.attempt


def lose(house: Deployment, record: JobRecord) -> str:
    """Lose the carrier that the record names now, as the keeper does."""
    carrier = house.jobs.job(record.id).carrier
    return lose_carrier(house, record, carrier)


def lose_carrier(house: Deployment, record: JobRecord, carrier: int) -> str:
    keys = house.keys
    word: bytes = house.client.register_script(scripts.LOSE)(
        keys=[keys.job(record.id), keys.waiting, keys.started, keys.expiring, keys.ended(record.id)],
        args=[
            record.id,
            carrier,
            carrier_name(record.id, carrier),
            carrier_name(record.id, carrier + 1),
            MOST_CARRIERS_UNBEGUN,
        ],
    )
    return word.decode()


def no_way() -> Diagnosis:
    return Diagnosis(complete=False, summary="no way", conflicts=[], cautions=["advisory"])


def test_a_claim_hands_out_the_request_as_it_was_accepted(house: Deployment, job: JobRecord) -> None:
    claimed = claim(house.client, house.keys, carrier_name(job.id, 1))
    assert claimed is not None
    assert claimed.request == jobs.small().resolved == house.jobs.request(job.id)
    record = house.jobs.job(job.id)
    assert (record.state, record.attempt, record.tries_left) == ("running", 1, 3)
    assert record.started_at is not None


def test_a_job_is_claimed_once(house: Deployment, job: JobRecord) -> None:
    begun(house, job)
    assert claim(house.client, house.keys, carrier_name(job.id, 1)) is None


def test_a_claim_sent_again_after_a_lost_reply_finds_itself(house: Deployment, job: JobRecord) -> None:
    keys = house.keys
    script = house.client.register_script(scripts.CLAIM)
    name = carrier_name(job.id, 1)
    where = [keys.job(job.id), keys.request(job.id), keys.waiting, keys.started]
    first = script(keys=where, args=[1, name, "token"])
    assert script(keys=where, args=[1, name, "token"]) == first
    assert house.jobs.job(job.id).attempt == 1


def test_an_answer_ends_the_job_and_is_read_as_it_was_written(house: Deployment, job: JobRecord) -> None:
    assert begun(house, job).hand_over(no_way()) == "finished"
    record = house.jobs.job(job.id)
    assert (record.state, record.outcome, record.answer) == ("finished", "infeasible", "diagnosis")
    assert record.finished_at is not None
    assert record.expires_at is not None
    assert (record.expires_at - record.finished_at).days == 7
    assert house.jobs.diagnosis(job.id) == no_way().model_dump(mode="json") | {"job_id": job.id}
    with pytest.raises(NoAnswer):
        house.jobs.schedule(job.id)


LATE: dict[str, Callable[[Attempt], str]] = {
    "answer": lambda attempt: attempt.hand_over(no_way()),
    "failure": lambda attempt: attempt.fail("service-fault", "late"),
    "cancelled": lambda attempt: attempt.cancel(),
    "given back": lambda attempt: attempt.give_back(),
    "progress": lambda attempt: attempt.report("solving", 0.5),
}


@pytest.mark.parametrize("late", LATE.values(), ids=LATE.keys())
def test_an_attempt_that_was_taken_for_lost_writes_nothing(
    house: Deployment, job: JobRecord, late: Callable[[Attempt], str]
) -> None:
    first = begun(house, job)
    assert lose(house, job) == "queued"
    second = begun(house, job)
    before = house.client.hgetall(house.keys.job(job.id))
    assert late(first) == "lost"
    assert house.client.hgetall(house.keys.job(job.id)) == before
    assert second.hand_over(no_way()) == "finished"
    assert house.jobs.job(job.id).attempt == 2


def test_an_attempt_that_ended_writes_nothing_more(house: Deployment, job: JobRecord) -> None:
    attempt = begun(house, job)
    attempt.hand_over(no_way())
    assert attempt.fail("service-fault", "again") == "lost"
    assert house.jobs.job(job.id).state == "finished"
    assert house.jobs.diagnosis(job.id)["summary"] == "no way"


def test_a_cancel_wins_over_an_answer_that_comes_after_it(house: Deployment, job: JobRecord) -> None:
    attempt = begun(house, job)
    assert house.jobs.cancel(job.id).state == "cancelling"
    assert attempt.report() == "cancel"
    assert attempt.hand_over(no_way()) == "cancelled"
    record = house.jobs.job(job.id)
    assert (record.state, record.outcome, record.answer) == ("cancelled", None, None)
    assert not house.client.exists(house.keys.answer(job.id), house.keys.answer_of_attempt(job.id, 1))


def test_keeping_the_best_lets_the_answer_through(house: Deployment, job: JobRecord) -> None:
    attempt = begun(house, job)
    assert house.jobs.cancel(job.id, keep_best=True).state == "cancelling"
    assert attempt.report() == "keep_best"
    assert attempt.hand_over(no_way()) == "finished"


def test_to_let_go_is_stronger_than_to_keep_the_best_in_either_order(empty: Deployment) -> None:
    for wishes in ((True, False), (False, True)):
        job = empty.jobs.submit(jobs.small()).record
        attempt = begun(empty, job)
        for keep_best in wishes:
            empty.jobs.cancel(job.id, keep_best=keep_best)
        assert attempt.report() == "cancel"


def test_a_crash_costs_one_try_and_the_last_one_fails_the_job_with_what_was_seen(
    house: Deployment, job: JobRecord
) -> None:
    for left in (2, 1):
        begun(house, job)
        assert lose(house, job) == "queued"
        assert house.jobs.job(job.id).tries_left == left
    begun(house, job)
    house.client.register_script(scripts.WITNESS)(keys=[house.keys.job(job.id)], args=[3, "it was ended by signal 9"])
    assert lose(house, job) == "failed"
    record = house.jobs.job(job.id)
    assert (record.state, record.attempt) == ("failed", 3)
    assert record.error is not None
    assert record.error.reason == "worker-lost"
    assert "signal 9" in record.error.detail
    assert "Traceback" not in record.error.detail


def test_what_is_seen_of_an_earlier_carrier_is_not_noted(house: Deployment, job: JobRecord) -> None:
    begun(house, job)
    lose(house, job)
    house.client.register_script(scripts.WITNESS)(keys=[house.keys.job(job.id)], args=[1, "late word"])
    assert house.jobs.job(job.id).evidence is None


def test_a_carrier_is_lost_once(house: Deployment, job: JobRecord) -> None:
    begun(house, job)
    assert lose_carrier(house, job, 1) == "queued"
    assert lose_carrier(house, job, 1) == "other"
    assert house.jobs.job(job.id).tries_left == 2


def test_a_job_given_back_costs_no_try(house: Deployment, job: JobRecord) -> None:
    assert begun(house, job).give_back() == "queued"
    record = house.jobs.job(job.id)
    assert (record.state, record.tries_left, record.carrier, record.started_at) == ("queued", 3, 2, None)
    assert begun(house, job).number == 2


def test_a_worker_lost_while_its_job_was_called_off_leaves_it_cancelled(house: Deployment, job: JobRecord) -> None:
    begun(house, job)
    house.jobs.cancel(job.id)
    assert lose(house, job) == "cancelled"
    assert house.jobs.job(job.id).state == "cancelled"


def test_a_carrier_lost_before_it_was_begun_costs_no_try_but_not_for_ever(house: Deployment, job: JobRecord) -> None:
    for _ in range(MOST_CARRIERS_UNBEGUN - 1):
        assert lose(house, job) == "queued"
    assert house.jobs.job(job.id).tries_left == 3
    assert lose(house, job) == "failed"
    error = house.jobs.job(job.id).error
    assert error is not None
    assert error.reason == "worker-lost"


def test_a_large_answer_comes_in_parts_and_only_as_a_whole(house: Deployment, job: JobRecord) -> None:
    attempt = begun(house, job)
    long_winded = no_way().model_copy(update={"summary": "".join(chr(33 + (n * n) % 90) for n in range(3_000_000))})
    assert attempt.hand_over(long_winded) == "finished"
    assert house.jobs.diagnosis(job.id)["summary"] == long_winded.summary
    assert house.client.ttl(house.keys.answer(job.id)) == -1


def test_an_answer_waits_for_room_and_is_handed_out_whole(
    house: Deployment, job: JobRecord, monkeypatch: pytest.MonkeyPatch
) -> None:
    attempt = begun(house, job)
    waits: list[float] = []
    with house.no_room() as make_room:

        def wait(seconds: float) -> None:
            waits.append(seconds)
            assert house.jobs.job(job.id).state == "running"
            if len(waits) == 2:
                make_room()

        monkeypatch.setattr("workers.attempts.pause", wait)
        assert attempt.hand_over(no_way()) == "finished"
    assert len(waits) == 2
    assert house.jobs.diagnosis(job.id)["summary"] == "no way"


def test_a_cancelled_end_is_written_although_there_is_no_room(house: Deployment, job: JobRecord) -> None:
    attempt = begun(house, job)
    with house.no_room():
        assert attempt.cancel() == "cancelled"
