"""How the demo asks: it waits for the end, keeps what it is given, and says what came instead of an answer."""

import json
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest

from service.calling import Answered, Api, NotReached
from service.demo.answering import Answering, NoAnswerError, Reply
from service.demo.folder import CannotKeep, Folder

NOW = datetime(2027, 3, 15, 10, 0, tzinfo=UTC)
JOB = {"label": "Day ahead, b-1", "time_limit_seconds": 1}
HOME = "/v1/jobs/job-1"


class Scripted(Api):
    """Gives the answers that it was made with, in order, and notes what was asked."""

    def __init__(self, *answers: Answered | NotReached) -> None:
        super().__init__("127.0.0.1", 1)
        self.asked: list[tuple[str, str, dict[str, str]]] = []
        self.sent: list[object] = []
        self._answers = list(answers)

    def ask(self, method: str, path: str, document: object = None, **headers: str) -> Answered:
        self.asked.append((method, path, headers))
        self.sent.append(document)
        answer = self._answers.pop(0)
        if isinstance(answer, NotReached):
            raise answer
        return answer


def answered(status: int, document: Any) -> Answered:
    return Answered(status, {}, json.dumps(document).encode())


def record(state: str, **links: str | None) -> dict[str, Any]:
    return {
        "id": "job-1",
        "label": JOB["label"],
        "state": state,
        "error": {"reason": "worker-lost"} if state == "failed" else None,
        "links": {"self": HOME, "request": f"{HOME}/request", "schedule": None, "diagnosis": None, **links},
    }


@pytest.fixture
def folder(tmp_path: Path) -> Folder:
    return Folder.made(tmp_path / "out", NOW)


def test_it_asks_until_the_job_has_ended_and_keeps_every_document(folder: Folder) -> None:
    ended = record("finished", schedule=f"{HOME}/schedule")
    api = Scripted(
        answered(202, record("queued")),
        answered(200, record("running")),
        answered(200, ended),
        answered(200, {"a": "request"}),
        answered(200, ended),
        Answered(200, {}, b"interval_start_utc\r\n"),
        answered(200, {"outcome": "optimal"}),
    )
    assert Answering(api, folder).answer(JOB) == Reply({"a": "request"}, {"outcome": "optimal"})
    assert [(method, path) for method, path, _ in api.asked[:3]] == [("POST", "/v1/jobs"), ("GET", HOME), ("GET", HOME)]
    assert all(headers == {"Prefer": "wait=30"} for _, _, headers in api.asked[:3])
    assert api.sent == [JOB, None, None, None, None, None, None]
    stem = "day-ahead-b-1"
    kept = [f"{stem}-request.json", f"{stem}-job.json", f"{stem}-schedule.csv", f"{stem}-schedule.json"]
    assert folder.names == ["READ-FIRST.txt", *kept]
    assert (folder.path / kept[2]).read_bytes() == b"interval_start_utc\r\n"


def test_of_a_job_that_cannot_be_met_the_nearest_schedule_is_kept_where_there_is_one(folder: Folder) -> None:
    for nearest in (None, {"margin": 1.0}):
        ended = record("finished", diagnosis=f"{HOME}/diagnosis")
        diagnosis = {"outcome": "infeasible", "nearest_schedule": nearest}
        api = Scripted(
            *(answered(202, ended), answered(200, {}), answered(200, ended), answered(200, diagnosis)),
            Answered(200, {}, b"interval_start_utc\r\n"),
        )
        assert Answering(api, folder).answer(JOB).answer == diagnosis
        last = f"{HOME}/diagnosis" if nearest is None else f"{HOME}/schedule?accept_shortfall=true"
        assert api.asked[-1][1] == last
        assert ("day-ahead-b-1-nearest-schedule-falls-short.csv" in folder.names) is (nearest is not None)


def test_the_patch_that_made_a_job_is_kept_beside_it(folder: Folder) -> None:
    ended = record("finished", schedule=f"{HOME}/schedule")
    api = Scripted(answered(202, ended), *(answered(200, {}) for _ in range(4)))
    patch = [{"op": "remove", "path": "/outages/0"}]
    Answering(api, folder).answer(JOB, patch)
    assert json.loads((folder.path / "day-ahead-b-1-patch.json").read_bytes()) == patch
    assert api.sent[0] == JOB


def test_a_job_that_failed_is_no_answer_and_its_reason_is_told(folder: Folder) -> None:
    ended = record("failed")
    api = Scripted(answered(202, ended), answered(200, {}), answered(200, ended))
    with pytest.raises(NoAnswerError, match=r"no answer to job job-1: it is failed: \{'reason': 'worker-lost'\}"):
        Answering(api, folder).answer(JOB)


def test_a_refusal_is_no_answer_and_is_told_with_its_status(folder: Folder) -> None:
    api = Scripted(answered(422, {"errors": [{"pointer": "/colour"}]}))
    with pytest.raises(NoAnswerError, match=r"POST /v1/jobs: status 422: .*/colour"):
        Answering(api, folder).answer(JOB)
    assert folder.names == []


def test_a_service_out_of_reach_is_no_answer(folder: Folder) -> None:
    with pytest.raises(NoAnswerError, match="nobody is there"):
        Answering(Scripted(NotReached("nobody is there")), folder).answer(JOB)


def test_a_folder_is_made_by_the_clock_and_none_is_used_twice(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    made = [Folder.made(None, NOW).path.name for _ in range(3)]
    assert made == [f"hourwright-demo-20270315-100000{more}" for more in ("", "-2", "-3")]


def test_a_folder_that_holds_files_is_left_alone(tmp_path: Path) -> None:
    (tmp_path / "mine").write_text("mine", encoding="utf-8")
    with pytest.raises(CannotKeep, match="holds files already"):
        Folder.made(tmp_path, NOW)
    with pytest.raises(CannotKeep, match="cannot make a folder"):
        Folder.made(tmp_path / "mine" / "below", NOW)


def test_only_a_folder_that_was_made_for_nothing_is_taken_away(tmp_path: Path) -> None:
    for folder, stays in ((tmp_path / "new", False), (tmp_path, True)):
        Folder.made(folder, NOW).leave()
        assert folder.exists() is stays
