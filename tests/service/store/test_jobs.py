"""Jobs as the web side finds them."""

from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from threading import Barrier, Thread
from time import monotonic
from typing import Any

import pytest
from redis import exceptions
from rq import Queue

from schemas.records import Reference, carrier_name
from service.connection import connect
from service.settings import Settings
from service.store import (
    Accepted,
    AlreadyEnded,
    BadCursor,
    IdempotencyKey,
    JobForgotten,
    JobStore,
    KeyReused,
    NoAnswer,
    NoSuchAsset,
    NoSuchJob,
    StillLive,
    StoreFull,
    StoreUnreachable,
)
from service.store.jobs import RedisJobStore
from tests.faults import jobs
from tests.faults.deployment import Deployment
from workers.attempts import Attempt, claim
from workers.planning.limits import Limits
from workers.planning.plan import plan


def begun(house: Deployment, job_id: str) -> Attempt:
    claimed = claim(house.client, house.keys, carrier_name(job_id, 1))
    assert claimed is not None
    return claimed.attempt


def finished(house: Deployment, accepted: Accepted) -> str:
    """Submit a job and plan it here, as a worker would."""
    job_id = house.jobs.submit(accepted).record.id
    begun(house, job_id).hand_over(plan(accepted.job, Limits(60.0, 1, monotonic())))
    return job_id


def key(name: str = "k", fingerprint: str = "f") -> IdempotencyKey:
    return IdempotencyKey(scope="POST /v1/jobs", key=name, fingerprint=fingerprint)


def test_the_store_keeps_the_promises_the_web_side_counts_on(empty: Deployment) -> None:
    store: JobStore = empty.jobs
    store.ping()


def test_a_submitted_job_is_read_back_with_all_that_was_said_of_it(empty: Deployment) -> None:
    said = jobs.small(label="day ahead", note="after the trip", method="milp", urgent=True)
    accepted = Accepted(said.job, said.resolved, "operator", Reference(id="pellow-bay", revision=3), None)
    record = empty.jobs.submit(accepted).record
    assert empty.jobs.job(record.id) == record
    assert (record.label, record.note, record.submitted_by) == ("day ahead", "after the trip", "operator")
    assert (record.state, record.task, record.method, record.attempt) == ("queued", "schedule", "milp", 0)
    assert (record.fleet, record.window) == (Reference(id="pellow-bay", revision=3), None)
    assert record.queue_position == 1
    assert empty.jobs.request(record.id) == said.resolved
    public = record.model_dump()
    assert not {"tries_left", "carrier", "cancel", "urgent", "evidence"} & public.keys()


def test_an_urgent_job_waits_in_a_queue_of_its_own(empty: Deployment) -> None:
    ordinary = [empty.jobs.submit(jobs.small()).record for _ in range(2)]
    urgent = empty.jobs.submit(jobs.small(urgent=True)).record
    assert [record.queue_position for record in (*ordinary, urgent)] == [1, 2, 1]
    assert empty.jobs.health().queued == {"jobs": 2, "urgent": 1}


def test_an_unknown_job_is_told_from_one_that_was_deleted(empty: Deployment) -> None:
    record = empty.jobs.submit(jobs.small()).record
    empty.jobs.cancel(record.id)
    empty.jobs.delete(record.id)
    for call in (empty.jobs.job, empty.jobs.delete, empty.jobs.request, empty.jobs.cancel, empty.jobs.diagnosis):
        with pytest.raises(JobForgotten):
            call(record.id)
        with pytest.raises(NoSuchJob):
            call("job-unknown")


def test_a_live_job_is_not_deleted(empty: Deployment) -> None:
    waiting, running = (empty.jobs.submit(jobs.small()).record.id for _ in range(2))
    begun(empty, running)
    for job_id in (waiting, running):
        with pytest.raises(StillLive):
            empty.jobs.delete(job_id)
    empty.jobs.cancel(running)
    with pytest.raises(StillLive) as told:
        empty.jobs.delete(running)
    assert told.value.record.state == "cancelling"


def test_cancelling_what_waits_ends_it_and_what_has_ended_is_left_as_it_is(empty: Deployment) -> None:
    job_id = empty.jobs.submit(jobs.small()).record.id
    assert empty.jobs.cancel(job_id).state == "cancelled"
    assert empty.jobs.cancel(job_id).state == "cancelled"
    assert Queue("jobs", connection=empty.client).count == 0
    done = finished(empty, jobs.small())
    with pytest.raises(AlreadyEnded) as told:
        empty.jobs.cancel(done)
    assert told.value.record.state == "finished"


def test_a_schedule_is_read_asset_by_asset(empty: Deployment) -> None:
    document = {
        "fleet": {"assets": [_store("b-0"), _store("a-1"), _store("c-2")]},
        "window": {
            "start": "2027-03-14T00:00:00+00:00",
            "interval": "PT1H",
            "timezone": "UTC",
            "currency": "EUR",
            "price_per_mwh": [10.0, 90.0, 20.0, 80.0],
            "price_basis": "forecast",
        },
        "initial": {name: {"stored_mwh": 1.0} for name in ("b-0", "a-1", "c-2")},
    }
    accepted = jobs.accepted(document)
    job_id = finished(empty, accepted)
    whole = plan(accepted.job, Limits(60.0, 1, monotonic())).model_dump(mode="json")
    parts = empty.jobs.schedule(job_id)
    assert list(parts.assets) == whole["assets"]
    assert parts.head["job_id"] == job_id
    assert parts.head["margin"] == whole["margin"]
    assert "assets" not in parts.head
    assert [asset["id"] for asset in empty.jobs.schedule(job_id, ["c-2", "b-0"]).assets] == ["b-0", "c-2"]
    assert empty.jobs.answer_kind(job_id) == "schedule"
    with pytest.raises(NoSuchAsset) as told:
        empty.jobs.schedule(job_id, ["b-0", "z-9"])
    assert told.value.asset_ids == ("z-9",)
    with pytest.raises(NoAnswer):
        empty.jobs.diagnosis(job_id)
    record = empty.jobs.job(job_id)
    assert parts.head["provenance"]["request_sha256"] == record.request_sha256
    assert record.progress.margin == whole["margin"]


def _store(name: str) -> dict[str, Any]:
    return {
        "id": name,
        "kind": "storage",
        "discharge_limit_mw": 1.0,
        "charge_limit_mw": 1.0,
        "energy_capacity_mwh": 2.0,
        "charge_efficiency": 0.9,
        "discharge_efficiency": 0.9,
    }


def test_an_infeasible_job_is_finished_and_has_a_diagnosis(empty: Deployment) -> None:
    job_id = finished(empty, jobs.impossible())
    assert empty.jobs.job(job_id).outcome == "infeasible"
    assert "evening" in empty.jobs.diagnosis(job_id)["summary"]


def test_waiting_ends_with_the_job_and_not_with_the_time(empty: Deployment) -> None:
    job_id = empty.jobs.submit(jobs.small()).record.id
    heard: list[str] = []
    waiting = Thread(target=lambda: heard.append(empty.jobs.wait(job_id, 30).state))
    waiting.start()
    channel = empty.keys.ended(job_id)
    empty.until(lambda: empty.client.pubsub_numsub(channel)[0][1], "somebody listens")
    begun(empty, job_id).cancel()
    waiting.join(10)
    assert heard == ["cancelled"]


def test_waiting_gives_the_job_as_it_is_when_the_time_is_over(empty: Deployment) -> None:
    job_id = empty.jobs.submit(jobs.small()).record.id
    assert empty.jobs.wait(job_id, 0.05).state == "queued"


def test_pages_hold_each_job_once_newest_first_while_others_arrive(empty: Deployment) -> None:
    ids = [empty.jobs.submit(jobs.small()).record.id for _ in range(7)]
    seen: list[str] = []
    cursor = None
    while True:
        page = empty.jobs.jobs(limit=3, cursor=cursor)
        seen += [record.id for record in page.jobs]
        empty.jobs.submit(jobs.small())
        if (cursor := page.next) is None:
            break
    assert seen == ids[::-1]


def test_jobs_of_one_instant_are_each_listed_once(empty: Deployment) -> None:
    ids = [empty.jobs.submit(jobs.small()).record.id for _ in range(5)]
    empty.client.zadd(empty.keys.by_time, dict.fromkeys(ids, 1_800_000_000_000_000))
    seen: list[str] = []
    cursor = None
    while True:
        page = empty.jobs.jobs(limit=2, cursor=cursor)
        seen += [record.id for record in page.jobs]
        if (cursor := page.next) is None:
            break
    assert seen == sorted(ids, reverse=True)


def test_a_list_is_narrowed_by_state_and_label(empty: Deployment) -> None:
    wanted = empty.jobs.submit(jobs.small(label="a")).record.id
    other = empty.jobs.submit(jobs.small(label="b")).record.id
    empty.jobs.cancel(other)
    assert [record.id for record in empty.jobs.jobs(label="a").jobs] == [wanted]
    assert [record.id for record in empty.jobs.jobs(state="cancelled").jobs] == [other]
    assert empty.jobs.jobs(state="cancelled", label="a").jobs == []


@pytest.mark.parametrize("cursor", ["", "x", "%%%", "am9icwox", "Zmxl\n"])
def test_a_cursor_that_no_list_gave_is_refused(empty: Deployment, cursor: str) -> None:
    with pytest.raises(BadCursor):
        empty.jobs.jobs(cursor=cursor)


def test_one_key_makes_one_job_of_twenty_submissions_at_once(empty: Deployment) -> None:
    callers = 20
    start = Barrier(callers)

    def submit(_number: int) -> tuple[str, bool]:
        start.wait(30)
        submission = empty.jobs.submit(jobs.small(), key())
        return submission.record.id, submission.replayed

    with ThreadPoolExecutor(callers) as pool:
        answers = list(pool.map(submit, range(callers)))
    assert len({job_id for job_id, _ in answers}) == 1
    assert sorted(replayed for _, replayed in answers) == [False] + [True] * (callers - 1)
    assert len(empty.jobs.jobs().jobs) == 1
    assert Queue("jobs", connection=empty.client).count == 1


def test_a_key_is_remembered_by_where_it_was_used_and_refused_for_another_payload(empty: Deployment) -> None:
    first = empty.jobs.submit(jobs.small(), key()).record
    again = empty.jobs.recall(key())
    assert again is not None
    assert (again.record.id, again.replayed) == (first.id, True)
    with pytest.raises(KeyReused):
        empty.jobs.recall(key(fingerprint="other"))
    with pytest.raises(KeyReused):
        empty.jobs.submit(jobs.small(), key(fingerprint="other"))
    elsewhere = IdempotencyKey(scope="another tenant", key="k", fingerprint="other")
    assert empty.jobs.recall(elsewhere) is None
    assert empty.jobs.submit(jobs.small(), elsewhere).record.id != first.id
    day_ms = 24 * 3_600_000
    kept: Any = [empty.client.pttl(name) for name in empty.client.scan_iter("hourwright:idempotency:*")]
    assert all(day_ms - 60_000 < milliseconds <= day_ms for milliseconds in kept)


def test_a_key_whose_job_was_deleted_says_so(empty: Deployment) -> None:
    first = empty.jobs.submit(jobs.small(), key()).record
    empty.jobs.cancel(first.id)
    empty.jobs.delete(first.id)
    with pytest.raises(JobForgotten):
        empty.jobs.recall(key())


def test_a_submission_sent_again_after_a_lost_reply_is_one_job(
    empty: Deployment, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("service.store.jobs.secrets.token_urlsafe", lambda _size: "the-same")
    first = empty.jobs.submit(jobs.small(), key()).record
    assert empty.jobs.submit(jobs.small(), key()).record == first
    assert Queue("jobs", connection=empty.client).count == 1


def test_a_long_queue_takes_nothing_more(empty: Deployment) -> None:
    store = RedisJobStore(empty.client, Settings(longest_queue=2))
    for _ in range(2):
        store.submit(jobs.small())
    with pytest.raises(StoreFull) as told:
        store.submit(jobs.small(), key())
    assert told.value.retry_after_seconds > 0
    assert len(store.jobs().jobs) == 2
    assert store.recall(key()) is None
    store.submit(jobs.small(urgent=True))


def test_a_store_near_its_limit_takes_no_work_and_still_gives_answers(empty: Deployment) -> None:
    job_id = finished(empty, jobs.small())
    store = RedisJobStore(empty.client, Settings(memory_share=0.001))
    with pytest.raises(StoreFull) as told:
        store.submit(jobs.small())
    assert "memory" in told.value.why
    assert list(store.schedule(job_id).assets)


def test_a_store_that_is_full_says_so_and_keeps_nothing_of_the_refused(empty: Deployment) -> None:
    store = RedisJobStore(empty.client, Settings(memory_share=0.999999))
    store._memory.share()  # what was known a moment ago
    with empty.no_room(), pytest.raises(StoreFull):
        store.submit(jobs.small())
    assert list(empty.client.scan_iter("hourwright:job*")) == []


def test_a_full_store_still_cancels(empty: Deployment) -> None:
    waiting, running = (empty.jobs.submit(jobs.small()).record.id for _ in range(2))
    begun(empty, running)
    with empty.no_room():
        assert empty.jobs.cancel(waiting).state == "cancelled"
        assert empty.jobs.cancel(running).state == "cancelling"


def test_a_store_out_of_reach_says_so(tmp_path: Path) -> None:
    with connect(f"unix://{tmp_path}/nobody.sock") as nobody:
        store = RedisJobStore(nobody, Settings())
        with pytest.raises(StoreUnreachable):
            store.ping()
        with pytest.raises(StoreUnreachable):
            store.submit(jobs.small())


def test_an_accepted_job_stands_although_the_queue_did_not_take_it(
    empty: Deployment, monkeypatch: pytest.MonkeyPatch
) -> None:
    def away(*_: Any, **__: Any) -> None:
        raise exceptions.ConnectionError("gone")

    monkeypatch.setattr(Queue, "enqueue", away)
    record = empty.jobs.submit(jobs.small()).record
    assert empty.jobs.job(record.id).state == "queued"
    waiting: Any = empty.client.zrange(empty.keys.waiting, 0, -1)
    assert waiting == [carrier_name(record.id, 1).encode()]
