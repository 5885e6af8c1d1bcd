"""The one command that runs every check."""

import sys

import pytest

from tests.__main__ import checks, passes


def test_every_check_but_the_tests_is_run() -> None:
    assert list(checks()) == ["format", "lint", "types", "imports"]


def test_a_check_that_holds_is_said_on_one_line(capsys: pytest.CaptureFixture[str]) -> None:
    assert passes("lint", [sys.executable, "-c", "print('nothing to say')"])
    (line,) = capsys.readouterr().out.splitlines()
    assert line.startswith("lint     ok")


def test_a_check_that_fails_is_said_after_what_it_printed(capsys: pytest.CaptureFixture[str]) -> None:
    assert not passes("types", [sys.executable, "-c", "import sys; sys.exit('a fault')"])
    fault, line = capsys.readouterr().out.splitlines()
    assert fault == "a fault"
    assert line.startswith("types    FAILED")
