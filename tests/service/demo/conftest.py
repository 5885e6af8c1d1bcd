"""One run of the demo for all who look at it."""

import json
import os
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path
from threading import Event
from time import monotonic
from typing import Any

import pytest

from service.demo.answering import Reply

PATIENCE_SECONDS = 240
Document = dict[str, Any]
Replies = dict[str, Reply]
EVENING = "day-ahead"
TRIPPED = "day-ahead-lw-b1-tripped"
CURED = "day-ahead-lw-b1-tripped-cured"


@dataclass(frozen=True)
class Shown:
    """What a run of the demo has printed, the folder that it left, what else it left there, and who took part."""

    printed: str
    folder: Path
    temporary: Path
    family: frozenset[int]

    def left(self, name: str) -> Document:
        document: Document = json.loads((self.folder / name).read_text(encoding="utf-8"))
        return document


@pytest.fixture(scope="session")
def demo(tmp_path_factory: pytest.TempPathFactory) -> Shown:
    """Run the whole demo from an empty folder and in the plainest of locales."""
    current, temporary = tmp_path_factory.mktemp("demo"), tmp_path_factory.mktemp("temporary")
    family: set[int] = set()
    said = temporary.with_suffix(".said")
    with (
        said.open("wb") as words,
        subprocess.Popen(
            [sys.executable, "-I", "-m", "service", "demo"],
            cwd=current,
            stdout=words,
            stderr=subprocess.STDOUT,
            env={"LANG": "C", "LC_ALL": "C", "PATH": os.environ["PATH"], "TMPDIR": str(temporary)},
        ) as process,
    ):
        until = monotonic() + PATIENCE_SECONDS
        while process.poll() is None:
            assert monotonic() < until
            family |= descendants(process.pid)
            Event().wait(0.01)
    printed = said.read_text(encoding="ascii")
    assert process.returncode == 0, printed
    (folder,) = current.iterdir()
    return Shown(printed, folder, temporary, frozenset(family))


def descendants(pid: int) -> set[int]:
    """Return the processes that a process has started, and those that these have started."""
    found: set[int] = set()
    for file in Path(f"/proc/{pid}/task").glob("*/children"):
        for child in map(int, _read(file).split()):
            found |= {child} | descendants(child)
    return found


def _read(file: Path) -> str:
    try:
        return file.read_text(encoding="ascii")
    except (FileNotFoundError, ProcessLookupError):  # ended just now
        return ""


@pytest.fixture(scope="session")
def printed(demo: Shown) -> str:
    return demo.printed


@pytest.fixture(scope="session")
def replies(demo: Shown) -> Replies:
    """Give what the service said to the demo's three questions, by the stem of the files that it left."""
    answers = {EVENING: "schedule", TRIPPED: "diagnosis", CURED: "schedule"}
    return {
        stem: Reply(demo.left(f"{stem}-request.json"), demo.left(f"{stem}-{what}.json"))
        for stem, what in answers.items()
    }
