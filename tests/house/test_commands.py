"""README's commands are the ones that are run."""

import re
import subprocess

from tests.house.files import ROOT

SET_UP = (
    "python3 -m venv .venv && .venv/bin/python -m pip install --quiet --require-hashes -r {lock}"
    " && .venv/bin/python -m pip install --quiet --no-deps --no-build-isolation {what} && {then}"
)
SEE_IT_WORK = SET_UP.format(lock="requirements.txt", what=".", then=".venv/bin/hourwright demo")
RUN_THE_CHECKS = SET_UP.format(lock="requirements-dev.txt", what="-e .", then=".venv/bin/python -m tests")


def fenced_commands() -> list[str]:
    """Return the lines of README's fenced blocks that make an environment."""
    blocks = re.findall(
        r"^```\w*\n(.*?)^```$", (ROOT / "README.md").read_text(encoding="utf-8"), re.DOTALL | re.MULTILINE
    )
    return [line for block in blocks for line in block.splitlines() if " -m venv " in line]


def test_readme_sets_up_by_one_line_and_tests_by_one_line() -> None:
    assert fenced_commands() == [SEE_IT_WORK, RUN_THE_CHECKS]


def test_continuous_integration_runs_the_test_command_of_readme_and_nothing_else() -> None:
    script = (ROOT / ".ci" / "run").read_text(encoding="utf-8").splitlines()
    assert script == ["#!/usr/bin/env bash", "set -euo pipefail", 'cd "$(dirname "$0")/.."', RUN_THE_CHECKS]


def test_the_shell_reads_both_scripts_without_a_fault() -> None:
    for shell, script in (("bash", ".ci/run"), ("sh", "service/hourwright")):
        outcome = subprocess.run([shell, "-n", script], cwd=ROOT, capture_output=True, text=True, check=False)
        assert (outcome.returncode, outcome.stderr) == (0, ""), script
