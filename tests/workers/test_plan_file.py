"""The planner as a process: its exit status, and one JSON document on standard output whatever happens."""

import json
import os
import signal
import subprocess
import sys
from io import StringIO
from pathlib import Path
from typing import Any, get_args

import pytest

from schemas.schedule import Outcome
from workers.plan_file import STATUS_OF, ProgressSign

PLANNER = [sys.executable, "-I", "-m", "workers.plan_file"]
PATIENCE_SECONDS = 120
Document = dict[str, Any]


def request(**more: Any) -> Document:
    """Return the smallest request that a solver must look at: one store, four hours, one price each."""
    store = {
        "id": "b1",
        "kind": "storage",
        "discharge_limit_mw": 1.0,
        "charge_limit_mw": 1.0,
        "energy_capacity_mwh": 2.0,
        "charge_efficiency": 1.0,
        "discharge_efficiency": 1.0,
    }
    window = {
        "start": "2027-03-16T00:00:00+00:00",
        "interval": "PT60M",
        "timezone": "Europe/Lisbon",
        "currency": "EUR",
        "price_per_mwh": [10.0, 20.0, 80.0, 70.0],
        "price_basis": "forecast",
    }
    return {"fleet": {"assets": [store]}, "window": window, "initial": {"b1": {"stored_mwh": 0.0}}, **more}


def hours_asked(hours: float, at_mw: float = 1.0) -> list[Document]:
    return [
        {
            "id": "firm",
            "kind": "hours_at_least",
            "applies_to": {"assets": ["b1"]},
            "threshold": {"mw": at_mw},
            "hours": hours,
        }
    ]


def planned(body: bytes | Document, *options: str, env: dict[str, str] | None = None) -> tuple[int, Document, str]:
    """Plan a body from standard input; return status, the one document on standard output, and the words beside it."""
    sent = body if isinstance(body, bytes) else json.dumps(body).encode()
    done = subprocess.run(
        [*PLANNER, *options, "-"], input=sent, capture_output=True, timeout=PATIENCE_SECONDS, check=False, env=env
    )
    document: Document = json.loads(done.stdout)
    return done.returncode, document, done.stderr.decode()


def pointers(problem: Document) -> set[str]:
    return {error["pointer"] for error in problem["errors"]}


def test_a_schedule_is_all_that_standard_output_holds_though_the_solver_prints_a_banner() -> None:
    status, schedule, words = planned(request())
    assert (status, schedule["outcome"], words) == (0, "optimal", "")
    # 10 + 20 paid, 80 + 70 earned, no losses: by hand.
    assert schedule["margin"] == pytest.approx(120.0, abs=1e-6)
    assert schedule["cautions"]


def test_the_solver_does_print_a_banner_when_nothing_is_done_about_it() -> None:
    made = [sys.executable, "-I", "-c", "import highspy; highspy.Highs()"]
    banner = subprocess.run(made, capture_output=True, timeout=PATIENCE_SECONDS, check=True)
    assert b"HiGHS" in banner.stdout


def test_what_cannot_be_met_ends_with_3_a_diagnosis_and_its_sentence() -> None:
    status, diagnosis, words = planned(request(commitments=hours_asked(3)))
    assert (status, diagnosis["outcome"]) == (3, "infeasible")
    assert words == f"infeasible: {diagnosis['summary']}\n"
    assert diagnosis["conflicts"][0]["members"][0]["pointer"] == "/commitments/0"


def test_a_check_without_a_violation_ends_with_0() -> None:
    status, schedule, words = planned(
        request(task="check", schedule={"assets": [{"id": "b1", "power_mw": [-1.0, -1.0, 1.0, 1.0]}]})
    )
    assert (status, schedule["outcome"], schedule["verification"]["violations"], words) == (0, "feasible", [], "")


def test_a_check_with_a_violation_ends_with_3_and_names_it() -> None:
    status, schedule, words = planned(
        request(task="check", schedule={"assets": [{"id": "b1", "power_mw": [-1.0, -1.0, 1.5, 0.5]}]})
    )
    assert (status, schedule["outcome"]) == (3, "violated")
    assert [(found["asset"], found["amount"]) for found in schedule["verification"]["violations"]] == [("b1", 0.5)]
    assert words.startswith("violated: 1 violation")


def test_no_time_at_all_ends_with_4_and_says_that_nothing_is_known() -> None:
    status, undecided, words = planned(request(needed_by="2020-01-01T00:00:00Z"))
    assert (status, undecided["outcome"]) == (4, "undecided")
    assert words == f"undecided: {undecided['summary']}\n"


def test_what_is_no_json_ends_with_2_and_says_where() -> None:
    status, problem, words = planned(b'{"fleet": }')
    assert (status, problem["type"], pointers(problem)) == (2, "/problems/malformed-json", {""})
    assert words.startswith("(whole document): ")
    assert "line 1, column 11" in words


def test_every_fault_of_a_request_has_its_pointer_in_the_document_and_its_line_beside_it() -> None:
    wrong = request(time_limit_seconds=0, colour="red")
    wrong["window"]["timezone"] = "Europe/Pellow"
    wrong["fleet"]["assets"][0]["charge_efficiency"] = 1.2
    status, problem, words = planned(wrong)
    places = {"/time_limit_seconds", "/colour", "/window/timezone", "/fleet/assets/0/charge_efficiency"}
    assert (status, problem["type"], pointers(problem)) == (2, "/problems/invalid-request", places)
    assert {line.split(": ")[0] for line in words.splitlines()} == places


def test_what_is_not_done_yet_is_refused_by_name() -> None:
    status, problem, words = planned(request(method="coordinated", task="reschedule", previous_job_id="j1"))
    assert (status, problem["type"]) == (2, "/problems/unsupported")
    assert pointers(problem) >= {"/method", "/task"}
    assert "/method: the method `coordinated`" in words


def test_a_method_that_does_not_fit_the_request_is_refused() -> None:
    coupled = request(method="per_asset", commitments=[{**hours_asked(1)[0], "applies_to": {"group": ["b1", "b2"]}}])
    coupled["fleet"]["assets"].append({**coupled["fleet"]["assets"][0], "id": "b2"})
    coupled["initial"]["b2"] = {"stored_mwh": 0.0}
    status, problem, _ = planned(coupled)
    assert (status, problem["type"], problem["errors"][0]["code"]) == (2, "/problems/invalid-request", "coupled")


@pytest.mark.parametrize("body", [b"", b"\xff\xfe", b"[" * 100_000, b"null", b'{"a": NaN}', b'"\\ud800"', b"{}"])
def test_no_body_is_bad_enough_for_a_traceback(body: bytes) -> None:
    status, problem, words = planned(body)
    assert (status, problem["status"] in (400, 422)) == (2, True)
    assert "Traceback" not in words
    assert words


def test_more_faults_than_a_person_reads_are_counted() -> None:
    status, problem, words = planned(request(**{f"extra{number}": 1 for number in range(40)}, initial={"b1": 1}))
    assert status == 2
    assert len(words.splitlines()) == len(problem["errors"])
    many = request(outages=[1] * 150)
    status, problem, words = planned(many)
    assert (status, len(problem["errors"]), problem["errors_truncated"]) == (2, 100, True)
    assert words.splitlines()[-1] == "and 50 faults more"


def test_a_name_cannot_steer_the_terminal_or_break_a_line() -> None:
    status, _, words = planned(request(initial={"b1": {"stored_mwh": 0}, "\x1b[31m\nred": {"stored_mwh": 0}}))
    assert status == 2
    assert "\x1b" not in words
    assert all(": " in line for line in words.splitlines())


def test_a_file_is_read_by_its_name_even_one_that_looks_like_an_option(tmp_path: Path) -> None:
    (tmp_path / "--day.json").write_text(json.dumps(request()), encoding="utf-8")
    done = subprocess.run(
        [*PLANNER, "--threads", "1", "--", "--day.json"],
        cwd=tmp_path,
        capture_output=True,
        timeout=PATIENCE_SECONDS,
        check=False,
    )
    assert (done.returncode, json.loads(done.stdout)["provenance"]["threads"]) == (0, 1)


@pytest.mark.parametrize(("name", "why"), [("absent.json", "No such file"), ("", "directory")])
def test_a_file_that_cannot_be_read_ends_with_2_and_one_line(tmp_path: Path, name: str, why: str) -> None:
    done = subprocess.run(
        [*PLANNER, str(tmp_path / name)], capture_output=True, text=True, timeout=PATIENCE_SECONDS, check=False
    )
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr.count("\n") == 1
    assert "cannot be read" in done.stderr
    assert why in done.stderr


def test_a_file_of_64_mib_is_read_and_one_byte_more_is_not(tmp_path: Path) -> None:
    body = json.dumps(request()).encode()
    assert planned(body.ljust(64 * 2**20))[0] == 0
    large = tmp_path / "large.json"
    large.write_bytes(body.ljust(64 * 2**20 + 1))
    done = subprocess.run([*PLANNER, str(large)], capture_output=True, text=True, timeout=PATIENCE_SECONDS, check=False)
    assert (done.returncode, done.stdout) == (2, "")
    assert "larger than 64 MiB" in done.stderr


def test_closed_input_and_output_are_said_in_a_line() -> None:
    command = " ".join(PLANNER)
    for shell, status, words in (
        (f"{command} - <&-", 2, "standard input is closed"),
        (f"printf '%s' '{json.dumps(request())}' | {command} - >&-", 1, "the answer cannot be written"),
        (f"printf '%s' '{json.dumps(request())}' | {command} - >/dev/full", 1, "the answer cannot be written"),
    ):
        done = subprocess.run(
            ["bash", "-o", "pipefail", "-c", shell],
            capture_output=True,
            text=True,
            timeout=PATIENCE_SECONDS,
            check=False,
        )
        assert (done.returncode, done.stdout) == (status, ""), shell
        assert words in done.stderr
        assert "Traceback" not in done.stderr


def test_a_reader_that_went_away_is_no_fault_to_talk_about() -> None:
    reading, writing = os.pipe()
    os.close(reading)
    with os.fdopen(writing, "wb") as nobody_reads:
        done = subprocess.run(
            [*PLANNER, "-"],
            input=json.dumps(request()).encode(),
            stdout=nobody_reads,
            stderr=subprocess.PIPE,
            timeout=PATIENCE_SECONDS,
            check=False,
        )
    assert (done.returncode, done.stderr) == (141, b"")


@pytest.mark.parametrize("locale", ["C", "POSIX", "en_US.ISO-8859-1"])
def test_the_answer_is_utf_8_in_any_locale(locale: str) -> None:
    status, _, words = planned(
        request(label="Größe", größe=1), env={"LANG": locale, "LC_ALL": locale, "PATH": os.environ["PATH"]}
    )
    assert status == 2
    assert words.startswith("/gr")


def test_a_fault_of_ours_ends_with_1_with_its_evidence_and_without_an_answer() -> None:
    broken = (
        "import sys\n"
        "from schemas.schedule import Violation\n"
        "from workers import plan_file\n"
        "from workers.planning import plan\n"
        "def faulty(*_):\n"
        "    said = Violation(rule='r', pointer='/fleet', amount=1.0, unit='MW', text='one MW too much')\n"
        "    raise plan.PlanningError('the audit refuses', [said])\n"
        "plan.plan = faulty\n"
        "sys.exit(plan_file.main(['-']))\n"
    )
    done = subprocess.run(
        [sys.executable, "-I", "-c", broken],
        input=json.dumps(request()).encode(),
        capture_output=True,
        timeout=PATIENCE_SECONDS,
        check=False,
    )
    assert (done.returncode, done.stdout) == (1, b"")
    *_, evidence, last = done.stderr.decode().splitlines()
    assert evidence == "evidence: /fleet: one MW too much"
    assert last.startswith("a fault of ours, not of the request: PlanningError")


def test_an_interrupt_ends_it_with_130_and_without_a_word_while_a_solver_runs() -> None:
    # The plan tells when it has begun, then waits in native code that holds on to its thread, as a solver does.
    waiting = (
        "import os, sys, time\n"
        "from workers import plan_file\n"
        "from workers.planning import plan\n"
        "def long(*_):\n"
        "    os.write(2, b'begun')\n"
        "    time.sleep(100)\n"
        "plan.plan = long\n"
        "sys.exit(plan_file.main(['-']))\n"
    )
    with subprocess.Popen(
        [sys.executable, "-I", "-c", waiting], stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.PIPE
    ) as planner:
        assert planner.stdin is not None
        assert planner.stdout is not None
        assert planner.stderr is not None
        planner.stdin.write(json.dumps(request()).encode())
        planner.stdin.close()
        assert planner.stderr.read(5) == b"begun"
        planner.send_signal(signal.SIGINT)
        assert planner.wait(PATIENCE_SECONDS) == 130
        assert (planner.stdout.read(), planner.stderr.read()) == (b"", b"")


class Terminal(StringIO):
    """A stream that says it is a terminal."""

    def isatty(self) -> bool:
        return True


def test_progress_shows_on_a_terminal_after_a_second_and_leaves_nothing_behind() -> None:
    terminal, seconds = Terminal(), 0.0
    sign = ProgressSign(terminal, lambda: seconds)
    sign.progress("solving", 0.5)
    seconds = 0.9
    sign.show()
    assert terminal.getvalue() == ""
    seconds = 12.0
    sign.show()
    assert terminal.getvalue() == "\rsolving  50%, 12 s"
    sign.clear()
    assert terminal.getvalue().endswith("\r" + " " * len("solving  50%, 12 s") + "\r")


def test_progress_is_silent_where_no_person_looks_on() -> None:
    file = StringIO()
    for stream in (file, None):
        sign = ProgressSign(stream, iter((0.0, 60.0)).__next__)
        sign.show()
        sign.clear()
    assert file.getvalue() == ""


def test_every_outcome_has_an_exit_status() -> None:
    assert set(STATUS_OF) == set(get_args(Outcome))
