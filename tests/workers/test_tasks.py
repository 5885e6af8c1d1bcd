"""The main thread of an attempt ends it in time, whatever the planning thread is doing."""

from collections.abc import Callable, Iterator
from itertools import pairwise
from threading import Event
from typing import Any

import pytest
from redis.exceptions import ConnectionError as AwayError

from schemas.diagnosis import Diagnosis
from schemas.problems import Fault, Unsupported
from schemas.records import Keys
from tests.faults import jobs
from tests.faults.clocks import HandClock
from workers import tasks
from workers.planning.limits import Limits, Watch
from workers.planning.plan import PlanningError
from workers.tasks import KEEP_BEST_SECONDS, OVERRUN_SECONDS, REPORT_SECONDS, Execution, Surroundings

ANSWER = Diagnosis(complete=False, summary="no way", conflicts=[], cautions=["advisory"])


class Attempt:
    """Writes down what it is told; `wishes` is what the caller wants, look by look, the last one for good."""

    job_id, number = "job-1", 1

    def __init__(self, *wishes: str) -> None:
        self.said: list[Any] = []
        self._wishes = list(wishes) or [""]

    def report(self, phase: str = "", done: float = 0.0) -> str:
        if phase:
            self.said.append((phase, done))
        return self._wishes.pop(0) if len(self._wishes) > 1 else self._wishes[0]

    def hand_over(self, answer: Any) -> str:
        self.said.append(answer)
        return "finished"

    def cancel(self) -> str:
        self.said.append("cancel")
        return "cancelled"

    def fail(self, reason: str, detail: str) -> str:
        self.said.append((reason, detail))
        return "failed"

    def give_back(self) -> str:
        self.said.append("give back")
        return "queued"


class Stubborn:
    """A plan that works until it is let go, or until it is asked to stop if it listens."""

    def __init__(self, *, listens: bool) -> None:
        self.let_go = Event()
        self.begun = Event()
        self._listens = listens

    def __call__(self, _job: Any, _limits: Limits, watch: Watch) -> Any:
        watch.progress("solving", 0.25)
        with watch.solving(self.let_go.set if self._listens else lambda: None):
            self.begun.set()
            assert self.let_go.wait(30)
        return ANSWER


@pytest.fixture
def around(monkeypatch: pytest.MonkeyPatch) -> Surroundings:
    monkeypatch.setattr(tasks, "LOOK_SECONDS", 0.005)
    return Surroundings(redis=None, keys=Keys("test"), threads=1)  # type: ignore[arg-type]


@pytest.fixture
def stubborn(monkeypatch: pytest.MonkeyPatch) -> Iterator[Callable[[bool], Stubborn]]:
    made: list[Stubborn] = []

    def make(listens: bool) -> Stubborn:
        made.append(Stubborn(listens=listens))
        monkeypatch.setattr(tasks, "plan", made[-1])
        return made[-1]

    yield make
    for plan in made:
        plan.let_go.set()


class TickingClock(HandClock):
    """Moves on at each look."""

    def __init__(self, step: float) -> None:
        super().__init__()
        self._step = step

    def __call__(self) -> float:
        self.advance(self._step)
        return self.now


def run(attempt: Attempt, around: Surroundings, clock: HandClock | None = None, request: bytes | None = None) -> str:
    text = request if request is not None else jobs.small(time_limit_seconds=5).resolved
    return Execution(attempt, text, around, clock or TickingClock(0.0)).run()  # type: ignore[arg-type]


def faulty(monkeypatch: pytest.MonkeyPatch, fault: BaseException) -> None:
    def plan(*_: Any) -> Any:
        raise fault

    monkeypatch.setattr(tasks, "plan", plan)


def test_an_answer_is_handed_over(around: Surroundings, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(tasks, "plan", lambda *_: ANSWER)
    attempt = Attempt()
    assert run(attempt, around) == "finished"
    assert attempt.said == [ANSWER]


def test_a_cancel_does_not_wait_for_a_plan_that_does_not_listen(
    around: Surroundings, stubborn: Callable[[bool], Stubborn]
) -> None:
    stubborn(False)
    attempt = Attempt("", "", "cancel")
    assert run(attempt, around) == "cancelled"
    assert attempt.said == ["cancel"]


def test_keeping_the_best_asks_the_plan_to_stop_and_hands_over_what_it_has(
    around: Surroundings, stubborn: Callable[[bool], Stubborn]
) -> None:
    stubborn(True)
    attempt = Attempt("", "keep_best")
    assert run(attempt, around) == "finished"
    assert attempt.said == [ANSWER]


def test_keeping_the_best_of_a_plan_that_does_not_listen_ends_too(
    around: Surroundings, stubborn: Callable[[bool], Stubborn]
) -> None:
    stubborn(False)
    attempt = Attempt("keep_best")
    assert run(attempt, around, TickingClock(KEEP_BEST_SECONDS / 8)) == "cancelled"
    assert attempt.said[-1] == "cancel"


def test_an_attempt_that_is_no_longer_the_jobs_writes_nothing(
    around: Surroundings, stubborn: Callable[[bool], Stubborn]
) -> None:
    stubborn(False)
    attempt = Attempt("lost")
    assert run(attempt, around) == "superseded"
    assert attempt.said == []


def test_a_plan_past_its_limit_is_asked_to_stop(around: Surroundings, stubborn: Callable[[bool], Stubborn]) -> None:
    stubborn(True)
    attempt = Attempt()
    assert run(attempt, around, TickingClock(0.5)) == "finished"
    assert attempt.said[-1] == ANSWER


def test_a_plan_that_ignores_its_limit_is_given_up_and_not_tried_again(
    around: Surroundings, stubborn: Callable[[bool], Stubborn]
) -> None:
    stubborn(False)
    attempt = Attempt()
    clock = TickingClock(0.5)
    began = clock.now
    assert run(attempt, around, clock) == "failed"
    reason, detail = attempt.said[-1]
    assert (reason, "5 s" in detail) == ("time-limit-ignored", True)
    assert 5 + OVERRUN_SECONDS <= clock.now - began <= 5 + OVERRUN_SECONDS + 3


def test_a_plan_that_has_become_a_diagnosis_may_take_as_long_again(
    around: Surroundings, monkeypatch: pytest.MonkeyPatch
) -> None:
    let_go = Event()

    def diagnose(_job: Any, limits: Limits, watch: Watch) -> Any:
        watch.more_time(limits.seconds)
        assert let_go.wait(30)
        return ANSWER

    monkeypatch.setattr(tasks, "plan", diagnose)
    clock = TickingClock(0.5)
    began = clock.now
    assert run(Attempt(), around, clock) == "failed"
    let_go.set()
    assert 5 + 5 + OVERRUN_SECONDS <= clock.now - began <= 5 + 5 + OVERRUN_SECONDS + 3


def test_a_job_that_should_be_given_back_is(around: Surroundings, stubborn: Callable[[bool], Stubborn]) -> None:
    stubborn(False)
    around.give_back.set()
    attempt = Attempt()
    assert run(attempt, around) == "queued"
    assert attempt.said == ["give back"]


def test_progress_is_written_twice_a_second_at_most(around: Surroundings, monkeypatch: pytest.MonkeyPatch) -> None:
    let_go = Event()
    clock = TickingClock(0.03)
    times: list[float] = []

    def plan(_job: Any, _limits: Limits, watch: Watch) -> Any:
        while not let_go.wait(0.001):
            watch.progress("solving", 0.25)
        return ANSWER

    class Timed(Attempt):
        def report(self, phase: str = "", done: float = 0.0) -> str:
            if phase:
                times.append(clock.now)
            if len(times) == 4:
                let_go.set()
            return super().report(phase, done)

    monkeypatch.setattr(tasks, "plan", plan)
    assert run(Timed(), around, clock, jobs.small(time_limit_seconds=60).resolved) == "finished"
    assert all(later - earlier >= REPORT_SECONDS for earlier, later in pairwise(times))


def test_a_plan_goes_on_while_redis_is_away(around: Surroundings, stubborn: Callable[[bool], Stubborn]) -> None:
    plan = stubborn(True)

    class Away(Attempt):
        looks = 0

        def report(self, phase: str = "", done: float = 0.0) -> str:
            self.looks += 1
            if self.looks == 5:
                plan.let_go.set()
            raise AwayError(f"gone, {phase} {done} cannot be told")

    attempt = Away()
    assert run(attempt, around) == "finished"
    assert attempt.said == [ANSWER]


@pytest.mark.parametrize(
    ("fault", "reason"),
    [
        (MemoryError(), "out-of-memory"),
        (PlanningError("the audit refuses every schedule found", []), "planning-fault"),
        (Unsupported([Fault(pointer="/task", code="unsupported", detail="not done yet")]), "service-fault"),
        (ZeroDivisionError("secret path /x/y"), "service-fault"),
        (SystemExit(3), "service-fault"),
    ],
    ids=lambda value: type(value).__name__ if isinstance(value, BaseException) else value,
)
def test_a_fault_ends_the_job_with_a_reason_and_no_trace(
    around: Surroundings, monkeypatch: pytest.MonkeyPatch, fault: BaseException, reason: str
) -> None:
    faulty(monkeypatch, fault)
    attempt = Attempt()
    assert run(attempt, around) == "failed"
    said, detail = attempt.said[-1]
    assert said == reason
    assert "Traceback" not in detail
    assert "secret" not in detail


def test_a_request_that_cannot_be_read_any_more_fails_its_job(around: Surroundings) -> None:
    attempt = Attempt()
    assert run(attempt, around, request=b'{"of": "another version"}') == "failed"
    assert attempt.said[-1][0] == "service-fault"
