"""README's walk-through, run as it is printed by a shell against a running service."""

import csv
import json
import re
import shutil
import subprocess
from dataclasses import dataclass
from io import StringIO
from itertools import pairwise
from pathlib import Path
from threading import Event
from time import monotonic
from typing import Any

import pytest

from schemas.cautions import CAUTIONS
from service.calling import Api
from service.demo.own_service import own_service
from service.sample.trials import documents
from tests.house.files import ROOT

SECTION = "## Run it as a service"
UP = ".venv/bin/hourwright up --data ./hourwright-data --no-auth --sample"
EXPECTED = re.compile(r"^# (\d{3}(?: or \d{3})*)\b")
PATIENCE_SECONDS = 240

# Each call is made as printed; beside its answer, its status is written down.
NOTED = """
curl() {
  local call; call=$(ls "$NOTES" | grep -c body)
  command curl -w '%{stderr}%{http_code}' "$@" 2> "$NOTES/$call.status" | tee "$NOTES/$call.body"
}
"""


@dataclass(frozen=True)
class Call:
    """A call of the walk-through: the statuses that README names, the one that came, and the answer."""

    line: str
    named: tuple[int, ...]
    status: str
    body: str

    @property
    def document(self) -> Any:
        return json.loads(self.body)


def section() -> str:
    whole = (ROOT / "README.md").read_text(encoding="utf-8")
    return whole.split(f"\n{SECTION}\n")[1].split("\n## ")[0]


def blocks(language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```$", section(), re.DOTALL | re.MULTILINE)


def named_statuses(script: str) -> list[tuple[str, tuple[int, ...]]]:
    """Return each line with a call, and the statuses that the comment above it names."""
    lines = script.splitlines()
    found = []
    for before, line in pairwise(lines):
        if re.match(r"(\w+=\$\()?curl ", line):
            named = EXPECTED.match(before)
            assert named is not None, f"no status is named above: {line}"
            found.append((line, tuple(int(status) for status in named[1].split(" or "))))
    return found


@pytest.fixture(scope="module")
def calls(tmp_path_factory: pytest.TempPathFactory) -> list[Call]:
    """Run the whole walk-through; in the address of the service alone, the port is another one."""
    assert shutil.which("bash") is not None, "bash is needed: install the system package bash"
    assert shutil.which("curl") is not None, "curl is needed: install the system package curl"
    notes = tmp_path_factory.mktemp("notes")
    script = "".join(blocks("bash"))
    with own_service("--sample") as api:
        until_loaded(api)
        printed = "SERVICE=http://127.0.0.1:8080\n"
        assert script.count(printed) == 1
        ran = subprocess.run(
            ["bash", "-c", NOTED + script.replace(printed, f"SERVICE={api.url}\n")],
            env={"NOTES": str(notes), "PATH": "/usr/local/bin:/usr/bin:/bin", "LC_ALL": "C.UTF-8"},
            capture_output=True,
            text=True,
            timeout=PATIENCE_SECONDS,
            check=False,
        )
    assert (ran.returncode, ran.stderr) == (0, "")
    expected = named_statuses(script)
    assert len(list(notes.glob("*.body"))) == len(expected)
    return [
        Call(line, named, _read(notes / f"{place}.status"), _read(notes / f"{place}.body"))
        for place, (line, named) in enumerate(expected)
    ]


def until_loaded(api: Api) -> None:
    """Wait for the last document of the sample: it comes after the first answer of the service."""
    last = documents()[-1]
    until = monotonic() + PATIENCE_SECONDS
    while api.ask("GET", f"/v1/{last.kind}s/{last.id}").status != 200:
        assert monotonic() < until
        Event().wait(0.05)


def _read(file: Path) -> str:
    return file.read_text(encoding="utf-8")


def only(calls: list[Call], *parts: str) -> Call:
    (found,) = [call for call in calls if all(part in call.line for part in parts)]
    return found


def test_the_service_is_started_by_one_line() -> None:
    (line,) = blocks("")[:1]
    assert line.strip() == UP


def test_every_call_of_the_walk_through_is_found() -> None:
    script = "".join(blocks("bash"))
    assert len(named_statuses(script)) == len(re.findall(r"\bcurl -", script))
    assert all('-H "$AUTH"' in line for line, _ in named_statuses(script))


def test_every_call_is_answered_with_the_status_that_stands_above_it(calls: list[Call]) -> None:
    assert [(call.line, call.status) for call in calls if call.status not in map(str, call.named)] == []


def test_the_question_is_valid_and_sent_twice_is_one_job(calls: list[Call]) -> None:
    assert only(calls, "/validate").document["valid"] is True
    first, again = [call.document for call in calls if "evening-1" in call.line]
    assert first["id"] == again["id"]
    assert first["outcome"] == "optimal"
    assert first["fleet"] == {"id": "quay", "revision": 1}


def test_the_schedule_keeps_the_commitment_and_carries_its_cautions(calls: list[Call]) -> None:
    schedule = calls[
        [call.line for call in calls].index('curl -sS "$SERVICE/v1/jobs/$JOB/schedule" -H "$AUTH"')
    ].document
    assert schedule["commitments"][0]["met"] is True
    assert schedule["cautions"] == list(CAUTIONS)
    assert schedule["verification"]["violations"] == []
    rows = list(csv.DictReader(StringIO(only(calls, "text/csv").body)))
    assert [float(row["power_mw"]) for row in rows] == schedule["assets"][0]["power_mw"]


def test_the_request_that_is_kept_is_whole(calls: list[Call]) -> None:
    request = next(call for call in calls if "/request" in call.line).document
    assert request["fleet"]["assets"][0]["id"] == "quay-b1"
    assert request["window"]["price_per_mwh"] == [40.0, 75.0, 90.0, 60.0]
    assert [job["state"] for job in only(calls, "state=finished").document["jobs"]] == ["finished"]


def test_the_diagnosis_says_why_and_the_schedule_points_to_it(calls: list[Call]) -> None:
    diagnosis = only(calls, "/diagnosis")
    assert diagnosis.document["outcome"] == "infeasible"
    assert "3 h at 1 MW" in diagnosis.document["summary"]
    (missing,) = [call for call in calls if call.named == (404,)]
    assert missing.document["type"] == "/problems/no-schedule"
    assert missing.document["diagnosis"].endswith("/diagnosis")


def test_the_members_of_a_diagnosis_that_are_explained_are_those_it_has(calls: list[Call]) -> None:
    rows = re.findall(r"^\| (`[^|]+) \|", section().split("has a diagnosis:")[1].split("```")[0], re.MULTILINE)
    explained = {name for row in rows for name in re.findall(r"`(\w+)`", row)}
    always = {"job_id", "outcome", "assumptions", "cautions", "no_nearest_schedule", "commitment_costs"}
    assert explained == only(calls, "/diagnosis").document.keys() - always


def test_the_nearest_schedule_falls_short_and_says_so(calls: list[Call]) -> None:
    nearest = only(calls, "accept_shortfall").document
    assert nearest["cautions"][0].startswith("This schedule does not meet the request")
    assert nearest["shortfalls"]


def test_the_first_repair_sent_again_earns_what_was_said_of_it(calls: list[Call]) -> None:
    repair = only(calls, "/diagnosis").document["repairs"][0]
    sent = calls.index(only(calls, "with_repair"))
    job, schedule = calls[sent].document, calls[sent + 1].document
    assert job["outcome"] == "optimal"
    assert repair["margin"] - 0.01 <= schedule["margin"] <= repair["margin_bound"] + 0.01
    assert all(row["met"] for row in schedule["commitments"])


def test_a_job_that_is_stopped_is_cancelled(calls: list[Call]) -> None:
    stopped = calls[calls.index(only(calls, "/cancel")) + 1]
    assert stopped.document["state"] == "cancelled"


def test_a_refusal_is_printed_as_it_comes(calls: list[Call]) -> None:
    (refused,) = [call for call in calls if call.named == (422,)]
    (printed,) = blocks("json")
    assert json.loads(printed) == {"errors": refused.document["errors"]}
