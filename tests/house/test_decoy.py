"""The console script runs what is installed, whatever lies about under the same names."""

import os
import shutil
import subprocess
import sysconfig
from importlib.metadata import version
from pathlib import Path

import pytest

SCRIPT = Path(sysconfig.get_path("scripts")) / "hourwright"
DECOYS = ("schemas", "service", "workers", "hourwright")


@pytest.fixture
def decoys(tmp_path: Path) -> Path:
    """Lay a folder of packages that stop with 99 when imported, and their like where a user's own packages lie."""
    site = tmp_path / "home" / Path(sysconfig.get_path("purelib", "posix_user", {"userbase": ".local"}))
    for place in (tmp_path, site):
        for name in DECOYS:
            package = place / name
            package.mkdir(parents=True)
            for module in ("__init__.py", "__main__.py", "command_line.py"):
                (package / module).write_text("print('DECOY', flush=True)\nimport os\nos._exit(99)\n", encoding="utf-8")
    return tmp_path


def answer(command: Path | str, folder: Path, **environment: str) -> tuple[int, str, str]:
    """Run `--version` in a folder; return the exit status and all that was printed."""
    outcome = subprocess.run(
        [command, "--version"],
        cwd=folder,
        env={**os.environ, "HOME": str(folder / "home"), **environment},
        capture_output=True,
        text=True,
        check=False,
    )
    return outcome.returncode, outcome.stdout, outcome.stderr


def real_answer() -> tuple[int, str, str]:
    return 0, f"hourwright {version('hourwright')}\n", ""


def test_a_decoy_in_the_current_directory_or_on_a_path_is_not_picked_up(decoys: Path) -> None:
    assert answer(SCRIPT, decoys, PYTHONPATH=str(decoys)) == real_answer()


def test_a_decoy_in_the_parent_of_the_script_called_by_a_relative_path_is_not_picked_up(decoys: Path) -> None:
    assert answer(os.path.relpath(SCRIPT, decoys), decoys, PYTHONPATH=".") == real_answer()


def test_a_link_to_the_script_runs_the_same(decoys: Path) -> None:
    link = decoys / "home" / "linked"
    link.symlink_to(SCRIPT)
    assert answer(link, decoys, PYTHONPATH=str(decoys)) == real_answer()


def test_the_decoy_is_picked_up_where_nothing_guards_against_it(decoys: Path) -> None:
    python = SCRIPT.with_name("python")
    unguarded = subprocess.run(
        [python, "-m", "service", "--version"], cwd=decoys, capture_output=True, text=True, check=False
    )
    assert (unguarded.returncode, unguarded.stdout) == (99, "DECOY\n")


def test_a_folder_name_with_spaces_and_of_great_length_does_not_stop_the_script(tmp_path: Path) -> None:
    folder = tmp_path / "with two spaces" / ("x" * 250)
    folder.mkdir(parents=True)
    (folder / "python").write_text('#!/bin/sh\necho "$@"\n', encoding="utf-8")
    (folder / "python").chmod(0o755)
    shutil.copy(SCRIPT, folder)
    assert answer(folder / "hourwright", tmp_path) == (0, "-I -m service --version\n", "")


def test_the_script_is_the_one_that_the_project_ships() -> None:
    shipped = Path(__file__).resolve().parents[2] / "service" / "hourwright"
    assert SCRIPT.read_bytes() == shipped.read_bytes()
