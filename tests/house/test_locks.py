"""The locks hold what the project asks for, each pinned by version and hash, and come from no named place."""

import re
import tomllib
from pathlib import Path

import pytest
from packaging.markers import default_environment
from packaging.requirements import Requirement
from packaging.version import Version

from tests.house.files import ROOT

RUNTIME = ROOT / "requirements.txt"
DEVELOPMENT = ROOT / "requirements-dev.txt"
PROJECT = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
BACKEND = PROJECT["build-system"]["requires"]
NEEDED_TO_RUN = [*PROJECT["project"]["dependencies"], *BACKEND]
NEEDED_TO_DEVELOP = [*NEEDED_TO_RUN, *PROJECT["dependency-groups"]["dev"]]


def entries(lock: Path) -> list[str]:
    """Return a lock's entries, each with its hashes on the same line; comments are left out."""
    lines = [line for line in lock.read_text(encoding="utf-8").splitlines() if not line.lstrip().startswith("#")]
    return [entry for entry in "\n".join(lines).replace("\\\n", " ").splitlines() if entry.strip()]


def pins(lock: Path) -> dict[str, set[Version]]:
    """Return the versions that a lock pins, by name; more than one where the Python decides."""
    found: dict[str, set[Version]] = {}
    for entry in entries(lock):
        requirement = Requirement(entry.split("--hash", maxsplit=1)[0].strip())
        (pin,) = requirement.specifier
        assert pin.operator == "=="
        found.setdefault(requirement.name, set()).add(Version(pin.version))
    return found


@pytest.mark.parametrize("lock", [RUNTIME, DEVELOPMENT], ids=["runtime", "development"])
def test_every_entry_is_pinned_by_version_and_hash(lock: Path) -> None:
    assert entries(lock)
    for entry in entries(lock):
        assert re.fullmatch(
            r"[a-z0-9-]+(\[[a-z,]+\])?==\S+( ; [^#]+?)?(\s+--hash=sha256:[0-9a-f]{64})+", entry.strip()
        ), entry


@pytest.mark.parametrize("lock", [RUNTIME, DEVELOPMENT], ids=["runtime", "development"])
def test_no_lock_holds_an_address_or_a_path(lock: Path) -> None:
    text = lock.read_text(encoding="utf-8")
    assert re.findall(r"://|index-url|find-links|trusted-host|(?m:^-)|/\w+/", text) == []


@pytest.mark.parametrize(
    ("lock", "needed"), [(RUNTIME, NEEDED_TO_RUN), (DEVELOPMENT, NEEDED_TO_DEVELOP)], ids=["runtime", "development"]
)
def test_a_lock_holds_a_fitting_version_of_all_that_is_asked_for(lock: Path, needed: list[str]) -> None:
    pinned = pins(lock)
    for wanted in map(Requirement, needed):
        assert pinned.get(wanted.name), wanted
        assert all(wanted.specifier.contains(version) for version in pinned[wanted.name]), wanted


def test_tests_run_on_the_very_versions_that_are_installed_to_run() -> None:
    development = pins(DEVELOPMENT)
    assert {name: versions for name, versions in pins(RUNTIME).items() if development.get(name) != versions} == {}


def test_the_group_that_brings_the_build_backend_into_the_locks_is_the_backend() -> None:
    assert PROJECT["dependency-groups"]["build"] == BACKEND


def test_a_stated_python_is_running() -> None:
    assert Requirement(f"hourwright{PROJECT['project']['requires-python']}").specifier.contains(
        default_environment()["python_full_version"]
    )
