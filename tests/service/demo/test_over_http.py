"""The demo as a whole: what it leaves behind, and that nothing else is left, however it ends."""

import csv
import json
import os
import signal
import subprocess
import sys
from collections.abc import Callable
from datetime import UTC, datetime
from io import StringIO
from pathlib import Path
from threading import Event
from time import monotonic

import jsonpatch
import pytest

from schemas.cautions import CAUTIONS
from service.demo import over_http
from service.demo.own_service import ServiceFault, own_service
from tests.faults.deployment import is_gone
from tests.service.demo.conftest import CURED, EVENING, PATIENCE_SECONDS, TRIPPED, Shown, descendants

WHOLE_FAMILY = 6
"""The service, its Redis, its API, its keeper and two workers."""


def until(is_so: Callable[[], bool], what: str) -> None:
    end = monotonic() + PATIENCE_SECONDS
    while not is_so():
        assert monotonic() < end, what
        Event().wait(0.02)


def test_it_leaves_what_the_service_answered(demo: Shown) -> None:
    names = [f"{day}-{what}.json" for day in (EVENING, TRIPPED, CURED) for what in ("request", "job")]
    names += [f"{day}-schedule.{form}" for day in (EVENING, CURED) for form in ("json", "csv")]
    names += [f"{TRIPPED}-diagnosis.json", f"{TRIPPED}-nearest-schedule-falls-short.csv", f"{CURED}-patch.json"]
    assert {file.name for file in demo.folder.iterdir()} == {*names, "READ-FIRST.txt"}
    words = " ".join(demo.printed.split())
    assert all(f"- {name}" in words for name in names)
    assert f"Left in {demo.folder.name}:" in words
    assert (demo.folder / "READ-FIRST.txt").read_text(encoding="utf-8").split("\n")[:2] == list(CAUTIONS)


@pytest.mark.parametrize("day", [EVENING, CURED])
def test_table_schedule_and_job_tell_the_same(demo: Shown, day: str) -> None:
    schedule, job = demo.left(f"{day}-schedule.json"), demo.left(f"{day}-job.json")
    assert schedule["job_id"] == job["id"]
    assert (job["state"], job["outcome"]) == ("finished", schedule["outcome"])
    rows = list(csv.DictReader(StringIO((demo.folder / f"{day}-schedule.csv").read_text(encoding="utf-8"))))
    for asset in schedule["assets"]:
        assert [float(row["power_mw"]) for row in rows if row["asset"] == asset["id"]] == asset["power_mw"]


def test_the_cured_request_is_the_refused_one_with_the_patch_that_it_leaves_applied(demo: Shown) -> None:
    refused, cured = demo.left(f"{TRIPPED}-request.json"), demo.left(f"{CURED}-request.json")
    patch = json.loads((demo.folder / f"{CURED}-patch.json").read_text(encoding="utf-8"))
    assert patch == demo.left(f"{TRIPPED}-diagnosis.json")["repairs"][0]["patch"]
    assert jsonpatch.apply_patch(refused, patch) | {"label": cured["label"]} == cured


def test_the_table_that_falls_short_is_the_nearest_schedule_of_the_diagnosis(demo: Shown) -> None:
    nearest = demo.left(f"{TRIPPED}-diagnosis.json")["nearest_schedule"]
    table = (demo.folder / f"{TRIPPED}-nearest-schedule-falls-short.csv").read_text(encoding="utf-8")
    rows = list(csv.DictReader(StringIO(table)))
    for asset in nearest["assets"]:
        assert [float(row["power_mw"]) for row in rows if row["asset"] == asset["id"]] == asset["power_mw"]


def test_the_request_it_leaves_is_one_that_can_be_planned_again(demo: Shown) -> None:
    done = subprocess.run(
        [sys.executable, "-I", "-m", "service", "plan", str(demo.folder / f"{TRIPPED}-request.json")],
        capture_output=True,
        timeout=PATIENCE_SECONDS,
        check=False,
    )
    assert done.returncode == 3


def test_when_it_has_ended_nothing_of_it_runs(demo: Shown) -> None:
    assert len(demo.family) > WHOLE_FAMILY  # a worker starts a process for each job
    assert [pid for pid in demo.family if not is_gone(pid)] == []
    assert list(demo.temporary.iterdir()) == []


@pytest.mark.parametrize(
    ("number", "status"),
    [(signal.SIGINT, 130), (signal.SIGTERM, 143), (signal.SIGHUP, 129), (signal.SIGKILL, -signal.SIGKILL)],
)
def test_when_it_is_ended_by_a_signal_nothing_of_it_runs(tmp_path: Path, number: signal.Signals, status: int) -> None:
    with subprocess.Popen(
        [sys.executable, "-I", "-m", "service", "demo", "--out", str(tmp_path / "out")],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.PIPE,
        env={**os.environ, "TMPDIR": str(_made(tmp_path / "t"))},
    ) as process:
        until(lambda: len(descendants(process.pid)) >= WHOLE_FAMILY, "all of it has started")
        family = descendants(process.pid)
        process.send_signal(number)
        _, words = process.communicate(timeout=PATIENCE_SECONDS)
    assert (process.returncode, words) == (status, b"")
    if number == signal.SIGKILL:
        until(lambda: all(is_gone(pid) for pid in family), "the kernel has told them")
    else:
        assert [pid for pid in family if not is_gone(pid)] == []
        assert list((tmp_path / "t").iterdir()) == []
        assert not (tmp_path / "out").exists()


def test_an_exception_ends_the_service_and_settings_around_it_do_not_count(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("HOURWRIGHT_ALLOWED_HOSTS", "elsewhere.example")
    family: set[int] = set()
    with pytest.raises(ZeroDivisionError), own_service():  # noqa: PT012 - what runs is to be seen from within
        family = descendants(os.getpid())
        raise ZeroDivisionError
    assert len(family) >= WHOLE_FAMILY
    assert [pid for pid in family if not is_gone(pid)] == []


def test_a_service_that_does_not_start_is_told_with_its_last_words() -> None:
    with (
        pytest.raises(ServiceFault, match=r"(?s)did not start \(status 2\).*expected, not 'none'"),
        own_service("--workers", "none"),
    ):
        pytest.fail("it has started")


def test_without_a_place_for_the_answers_it_does_not_begin(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "mine").write_text("mine", encoding="utf-8")
    assert over_http.demo(sys.stdout, tmp_path, datetime.now(UTC)) == 2
    printed, words = capsys.readouterr()
    assert printed == ""
    assert "holds files already" in words


def _made(folder: Path) -> Path:
    folder.mkdir()
    return folder
