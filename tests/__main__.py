"""Run every check of the project: `python -m tests`, or `python -m tests --full` with the large counts.

Each check runs even when an earlier one has failed. The tests come last, so that their closing line ends the output.
"""

import argparse
import subprocess
import sys
import sysconfig
import time
from collections.abc import Sequence
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
PYTHON_TREES = ["schemas", "service", "workers", "tests"]


def checks() -> dict[str, list[str]]:
    """Return the command of each check but the tests, by name, in the order in which they run."""
    python = [sys.executable, "-m"]
    return {
        "format": [*python, "ruff", "format", "--check", *PYTHON_TREES],
        "lint": [*python, "ruff", "check", *PYTHON_TREES],
        "types": [*python, "mypy"],
        "imports": [str(Path(sysconfig.get_path("scripts")) / "lint-imports"), "--no-logo"],
    }


def passes(name: str, command: Sequence[str]) -> bool:
    """Run one check, print its result on one line, and before it what it said if it failed."""
    started = time.monotonic()
    outcome = subprocess.run(
        command, cwd=ROOT, stdout=subprocess.PIPE, stderr=subprocess.STDOUT, text=True, check=False
    )
    held = outcome.returncode == 0
    if not held:
        print(outcome.stdout, end="")
    print(f"{name:8} {'ok' if held else 'FAILED'} ({time.monotonic() - started:.1f} s)", flush=True)
    return held


def main(arguments: Sequence[str] | None = None) -> int:
    """Run all checks, then the tests; return 0 only if everything held."""
    parser = argparse.ArgumentParser(prog="python -m tests", description="Run every check of the project.")
    parser.add_argument("--full", action="store_true", help="run the large counts too")
    full = parser.parse_args(arguments).full
    failed = [name for name, command in checks().items() if not passes(name, command)]
    selection = ["-m", ""] if full else []
    tests = subprocess.run([sys.executable, "-m", "pytest", *selection], cwd=ROOT, check=False)
    return tests.returncode or (1 if failed else 0)


if __name__ == "__main__":
    sys.exit(main())
