"""`Prefer: wait=N`: answered at the end, or when the time is over; bounded in length and in number."""

import threading

import pytest

from service.web.parameters import seconds_to_wait
from tests.schemas.documents import plain
from tests.service.web.answers import schedule_document
from tests.service.web.live import Answered, House


def in_background(house: House, method: str, path: str, body: object = None, **headers: str) -> "Pending":
    pending = Pending()

    def ask() -> None:
        pending.answered = house.call(method, path, body, **headers)

    pending.thread = threading.Thread(target=ask)
    pending.thread.start()
    return pending


class Pending:
    """A conversation under way."""

    thread: threading.Thread
    answered: Answered | None = None

    def end(self) -> Answered:
        self.thread.join(20)
        assert self.answered is not None
        return self.answered


def until_waiting(house: House, count: int) -> None:
    """Return when so many waits have begun; no clock is asked, the store notes each wait."""
    while len(house.jobs.waits) < count:
        threading.Event().wait(0.005)


def test_a_read_that_waits_is_answered_at_the_end(house: House) -> None:
    job_id = house.submit(plain())
    begun = len(house.jobs.waits)
    pending = in_background(house, "GET", f"/v1/jobs/{job_id}", prefer="wait=20")
    until_waiting(house, begun + 1)
    assert pending.answered is None
    house.jobs.finish(job_id, schedule_document())
    answered = pending.end()
    assert answered.document["state"] == "finished"
    assert answered.headers["preference-applied"] == "wait=20"
    assert "retry-after" not in answered.headers


def test_a_submission_that_waits_is_still_202(house: House) -> None:
    begun = len(house.jobs.waits)
    pending = in_background(house, "POST", "/v1/jobs", plain(), prefer="respond-async, wait=20")
    until_waiting(house, begun + 1)
    (newest,) = house.call("GET", "/v1/jobs?limit=1").document["jobs"]
    house.jobs.finish(newest["id"], schedule_document())
    answered = pending.end()
    assert (answered.status, answered.document["state"]) == (202, "finished")
    assert answered.headers["location"] == f"/v1/jobs/{newest['id']}"


def test_an_ended_job_is_not_waited_for(house: House) -> None:
    job_id = house.submit(plain())
    house.jobs.finish(job_id, schedule_document())
    begun = len(house.jobs.waits)
    assert house.call("GET", f"/v1/jobs/{job_id}", prefer="wait=30").document["state"] == "finished"
    assert len(house.jobs.waits) == begun


def test_more_callers_than_seats_are_answered_at_once(house: House) -> None:
    job_id = house.submit(plain())
    begun = len(house.jobs.waits)
    seated = [in_background(house, "GET", f"/v1/jobs/{job_id}", prefer="wait=20") for _ in range(2)]
    until_waiting(house, begun + 2)
    turned_away = house.call("GET", f"/v1/jobs/{job_id}", prefer="wait=20")
    assert turned_away.document["state"] == "queued"
    assert "preference-applied" not in turned_away.headers
    house.jobs.finish(job_id, schedule_document())
    assert [pending.end().document["state"] for pending in seated] == ["finished", "finished"]
    again = house.call("GET", f"/v1/jobs/{job_id}", prefer="wait=20")
    assert again.headers["preference-applied"] == "wait=20"


def test_a_wait_of_nothing_is_answered_at_once(house: House) -> None:
    job_id = house.submit(plain())
    answered = house.call("GET", f"/v1/jobs/{job_id}", prefer="wait=0")
    assert answered.headers["preference-applied"] == "wait=0"
    assert answered.document["state"] == "queued"


@pytest.mark.parametrize(
    ("prefer", "seconds"),
    [
        ("wait=5", 5),
        ("WAIT = 5", 5),
        ('wait="5"', 5),
        ("respond-async, wait=5; x=y", 5),
        ("wait=5, wait=9", 5),
        ("wait=99999", 30),
        ("wait=0", 0),
        ("wait=9999999999", None),
        ("wait=-1", None),
        ("wait=1.5", None),
        ("wait", None),
        ("waiter=5", None),
        ("zzz", None),
        ("", None),
        ("wait=٣", None),
    ],
)
def test_a_preference_is_read_or_passed_over(prefer: str, seconds: int | None) -> None:
    assert seconds_to_wait(prefer, 30) == seconds
