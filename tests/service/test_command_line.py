"""The command line: what is printed where, and with which status it ends."""

import json
import os
import re
import signal
import socket
import subprocess
import sys
from collections.abc import Set
from importlib.metadata import version
from pathlib import Path
from threading import Event

import pytest

from schemas.records import rq_prefix
from service.command_help import OPEN_ON_LOOPBACK_ONLY
from service.demo.own_service import free_port
from service.settings import Settings
from tests.faults.deployment import is_gone
from tests.service.test_up import children
from tests.workers.test_plan_file import hours_asked, request
from workers.settings import Settings as WorkerSettings

HOURWRIGHT = [sys.executable, "-I", "-m", "service"]
PATIENCE_SECONDS = 120


def ran(*arguments: str, sent: str = "", **settings: str) -> tuple[int, str, str]:
    """Run a command line to its end, under these settings; return its status and what it printed."""
    done = subprocess.run(
        [*HOURWRIGHT, *arguments],
        input=sent,
        capture_output=True,
        env={**os.environ, **settings},
        text=True,
        timeout=PATIENCE_SECONDS,
        check=False,
    )
    return done.returncode, done.stdout, done.stderr


def test_the_version_is_that_of_the_distribution() -> None:
    assert ran("--version") == (0, f"hourwright {version('hourwright')}\n", "")


def test_no_command_is_an_error_that_shows_the_help() -> None:
    status, printed, words = ran()
    assert (status, printed) == (2, "")
    assert words.startswith("usage: hourwright")
    assert all(f"\n    {command} " in words for command in ("plan", "demo", "up", "serve", "work", "keep"))


@pytest.mark.parametrize(
    "arguments",
    [
        ("paln", "day.json"),
        ("plan",),
        ("plan", "--threads", "0", "-"),
        ("plan", "--threads", "½", "-"),
        ("demo", "here"),
        ("up", "--no-auth"),
        ("up", "--no-auth", "--data", "d", "--port", "0"),
        ("up", "--no-auth", "--data", "d", "--port", "65536"),
        ("up", "--no-auth", "--data", "d", "--workers", "0"),
        ("work", "--queue", "later"),
        ("serve", "--port", "8080"),
        ("keep", "this"),
    ],
)
def test_a_wrong_command_line_ends_with_2_and_prints_nothing_else(arguments: tuple[str, ...]) -> None:
    status, printed, words = ran(*arguments)
    assert (status, printed) == (2, "")
    assert "usage: hourwright" in words
    assert "Traceback" not in words


@pytest.mark.parametrize(("command", "statuses"), [("plan", 5), ("demo", 3), ("up", 3), ("serve", 3)])
def test_the_help_of_a_command_tells_every_exit_status(command: str, statuses: int) -> None:
    status, printed, words = ran(command, "--help")
    assert (status, words) == (0, "")
    told = [line.split()[0] for line in printed.split("exit status:")[1].splitlines() if re.match(r"  \d    ", line)]
    assert told == [str(number) for number in range(statuses)]


@pytest.mark.parametrize(
    ("command", "names"),
    [
        ("serve", Settings.model_fields.keys()),
        ("work", WorkerSettings.model_fields.keys()),
        ("keep", WorkerSettings.model_fields.keys() - {"queue", "threads", "grace_seconds"}),
    ],
)
def test_the_help_of_a_process_names_its_settings(command: str, names: Set[str]) -> None:
    status, printed, words = ran(command, "--help")
    assert (status, words) == (0, "")
    assert "HOURWRIGHT_<NAME>" in printed
    named = re.findall(r"^  ([A-Z_]+(?:, [A-Z_]+)*)  ", printed, re.MULTILINE)
    assert {name.lower() for names_of_line in named for name in names_of_line.split(", ")} == names


def test_the_helps_of_up_and_serve_say_that_nobody_is_asked_for_a_key() -> None:
    assert OPEN_ON_LOOPBACK_ONLY[1:] in " ".join(ran("up", "--help")[1].split())
    assert "no API keys yet" in ran("serve", "--help")[1]


@pytest.mark.parametrize(
    ("more", "words"),
    [
        ((), OPEN_ON_LOOPBACK_ONLY),
        (("--no-auth", "--host", "0.0.0.0"), OPEN_ON_LOOPBACK_ONLY),
        (("--no-auth", "--host", "192.0.2.1"), OPEN_ON_LOOPBACK_ONLY),
    ],
)
def test_up_refuses_in_one_line_to_be_open_to_others(tmp_path: Path, more: tuple[str, ...], words: str) -> None:
    data = tmp_path / "data"
    assert ran("up", "--data", str(data), *more) == (2, "", f"hourwright up: {words}\n")
    assert not data.exists()


def test_up_does_not_take_the_answers_of_another_service_for_its_own(tmp_path: Path) -> None:
    with socket.socket() as other:
        other.bind(("127.0.0.1", 0))
        other.listen()
        port = other.getsockname()[1]
        status, printed, words = ran("up", "--no-auth", "--data", str(tmp_path / "data"), "--port", str(port))
    assert (status, printed) == (2, "")
    assert words.startswith(f"hourwright up: cannot listen at 127.0.0.1, port {port}: Address already in use")
    assert words.count("\n") == 1


def test_up_says_in_one_line_that_its_folder_cannot_be_made(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("", encoding="utf-8")
    status, printed, words = ran(
        "up", "--no-auth", "--data", str(tmp_path / "file" / "data"), "--port", str(free_port())
    )
    assert (status, printed, words.count("\n")) == (2, "", 1)


@pytest.mark.parametrize(
    ("settings", "status", "words"),
    [
        ({"HOURWRIGHT_PROT": "8080"}, 2, "no such setting: HOURWRIGHT_PROT"),
        ({"HOURWRIGHT_PORT": "99999"}, 2, "HOURWRIGHT_PORT: Input should be less than or equal to 65535"),
        ({"HOURWRIGHT_REDIS_URL": "elsewhere"}, 2, "Redis URL must specify"),
        ({"HOURWRIGHT_REDIS_PASSWORD_FILE": "/nowhere/password"}, 2, "/nowhere/password"),
        ({}, 2, "this version has no API keys yet"),
        (
            {"HOURWRIGHT_NO_AUTH": "true", "HOURWRIGHT_HOST": "192.0.2.1"},
            1,
            "cannot listen at 192.0.2.1, port 8080: Cannot assign requested address",
        ),
    ],
)
def test_serve_says_in_one_line_what_it_cannot_do(settings: dict[str, str], status: int, words: str) -> None:
    ended, printed, said = ran("serve", **settings)
    assert (ended, printed) == (status, "")
    assert said.startswith("hourwright serve: ")
    assert words in said
    assert said.count("\n") == 1


@pytest.mark.parametrize(
    ("arguments", "module", "settings"),
    [
        (("serve",), "service.serve", {}),
        (("keep",), "workers.keep_process", {}),
        (("work",), "workers.work_process", {"OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}),
        (("work", "--queue", "urgent"), "workers.work_process", {"HOURWRIGHT_QUEUE": "urgent"}),
    ],
)
def test_a_process_is_become_in_place_with_what_it_needs_in_its_environment(
    tmp_path: Path, arguments: tuple[str, ...], module: str, settings: dict[str, str]
) -> None:
    with subprocess.Popen(
        [*HOURWRIGHT, *arguments],
        env={
            **os.environ,
            "HOURWRIGHT_KEY_PREFIX": "trial",
            "HOURWRIGHT_NO_AUTH": "true",
            "HOURWRIGHT_PORT": str(free_port()),
            "HOURWRIGHT_REDIS_URL": f"unix://{tmp_path}/nowhere",
        },
        stderr=subprocess.DEVNULL,
    ) as process:
        try:
            while module not in _proc(process, "cmdline"):
                assert process.poll() is None
                Event().wait(0.01)
            found = dict(line.split("=", 1) for line in _proc(process, "environ") if "=" in line)
            assert _proc(process, "cmdline")[:4] == [sys.executable, "-I", "-m", module]
        finally:
            process.kill()
    assert settings.items() <= found.items()
    assert found["RQ_KEY_PREFIX"] == rq_prefix("trial")


def _proc(process: subprocess.Popen[bytes], name: str) -> list[str]:
    return Path(f"/proc/{process.pid}/{name}").read_text(encoding="utf-8").split("\0")


def test_an_interrupt_from_the_terminal_reaches_up_alone_which_ends_its_children_in_order(tmp_path: Path) -> None:
    said, password = tmp_path / "said", tmp_path / "password"
    password.write_text("of another Redis", encoding="utf-8")
    with (
        said.open("wb") as words,
        subprocess.Popen(
            [*HOURWRIGHT, "up", "--no-auth", "--data", str(tmp_path / "data"), "--port", str(free_port()), "--sample"],
            stdout=subprocess.PIPE,
            stderr=words,
            env={**os.environ, "HOURWRIGHT_REDIS_PASSWORD_FILE": str(password)},  # the embedded one has none
            start_new_session=True,  # as if it were alone in its terminal
            text=True,
        ) as process,
    ):
        assert process.stdout is not None
        lines = iter(process.stdout.readline, "")
        takes_long = next(line for line in lines if "sample: takes long" in line)
        ended = subprocess.run(["bash", "-c", takes_long.replace("wait=30", "wait=2")], capture_output=True, check=True)
        assert json.loads(ended.stdout)["state"] in ("queued", "running")
        family = children(process.pid)
        assert {os.getpgid(child) for child in family} == set(family)
        os.killpg(process.pid, signal.SIGINT)
        assert process.wait(PATIENCE_SECONDS) == 0
    assert all(is_gone(child) for child in family)
    assert "is killed" not in said.read_text(encoding="utf-8")


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


def test_a_demo_that_nobody_reads_ends_without_a_word_and_leaves_nothing(tmp_path: Path) -> None:
    reading, writing = os.pipe()
    os.close(reading)
    with os.fdopen(writing, "wb") as nobody_reads:
        done = subprocess.run(
            [*HOURWRIGHT, "demo"],
            cwd=tmp_path,
            stdout=nobody_reads,
            stderr=subprocess.PIPE,
            timeout=PATIENCE_SECONDS,
            check=False,
        )
    assert (done.returncode, done.stderr) == (141, b"")
    assert list(tmp_path.iterdir()) == []
