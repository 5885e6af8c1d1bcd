"""The command line: what is printed where, and with which status it ends."""

import json
import os
import signal
import subprocess
import sys
from importlib.metadata import version
from pathlib import Path

import pytest

from tests.workers.test_plan_file import hours_asked, request

HOURWRIGHT = [sys.executable, "-I", "-m", "service"]
PATIENCE_SECONDS = 120


def ran(*arguments: str, sent: str = "") -> tuple[int, str, str]:
    """Run a command line to its end; return its status and what it printed."""
    done = subprocess.run(
        [*HOURWRIGHT, *arguments], input=sent, capture_output=True, text=True, timeout=PATIENCE_SECONDS, check=False
    )
    return done.returncode, done.stdout, done.stderr


def test_the_version_is_that_of_the_distribution() -> None:
    assert ran("--version") == (0, f"hourwright {version('hourwright')}\n", "")


def test_no_command_is_an_error_that_shows_the_help() -> None:
    status, printed, words = ran()
    assert (status, printed) == (2, "")
    assert words.startswith("usage: hourwright")
    assert "plan" in words
    assert "demo" in words


@pytest.mark.parametrize(
    "arguments", [("paln", "day.json"), ("plan",), ("plan", "--threads", "0", "-"), ("plan", "--threads", "½", "-")]
)
def test_a_wrong_command_line_ends_with_2_and_prints_nothing_else(arguments: tuple[str, ...]) -> None:
    status, printed, words = ran(*arguments)
    assert (status, printed) == (2, "")
    assert "usage: hourwright" in words
    assert "Traceback" not in words


def test_the_help_of_plan_tells_every_exit_status() -> None:
    status, printed, _ = ran("plan", "--help")
    assert status == 0
    assert all(f"\n  {number}    " in printed for number in range(5))


def test_the_help_says_that_schedules_are_advisory() -> None:
    assert "Advisory" in ran("--help")[1]


def test_plan_passes_input_answer_words_and_status_through() -> None:
    status, printed, words = ran("plan", "-", "--threads", "3", sent=json.dumps(request()))
    schedule = json.loads(printed)
    assert (status, schedule["outcome"], schedule["provenance"]["threads"], words) == (0, "optimal", 3, "")
    status, printed, words = ran("plan", "-", sent=json.dumps(request(commitments=hours_asked(3))))
    assert (status, json.loads(printed)["outcome"]) == (3, "infeasible")
    assert words.startswith("infeasible: ")
    status, printed, words = ran("plan", "-", sent="{")
    assert (status, json.loads(printed)["type"]) == (2, "/problems/malformed-json")
    assert words.startswith("(whole document): ")


def test_an_interrupt_of_plan_ends_it_with_130_and_without_a_word(tmp_path: Path) -> None:
    fifo = tmp_path / "request.json"
    os.mkfifo(fifo)
    with (
        subprocess.Popen(
            [*HOURWRIGHT, "plan", str(fifo)], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
        ) as command,
        fifo.open("wb"),
    ):  # open only once the planner has opened it to read, and then waits
        command.send_signal(signal.SIGINT)
        printed, words = command.communicate(timeout=PATIENCE_SECONDS)
    assert (command.returncode, printed, words) == (130, "", "")


def test_a_demo_that_nobody_reads_ends_without_a_word() -> None:
    reading, writing = os.pipe()
    os.close(reading)
    with os.fdopen(writing, "wb") as nobody_reads:
        done = subprocess.run(
            [*HOURWRIGHT, "demo"], stdout=nobody_reads, stderr=subprocess.PIPE, timeout=PATIENCE_SECONDS, check=False
        )
    assert (done.returncode, done.stderr) == (141, b"")
