"""What lies where, how long it is, and what no file may say."""

import re

from tests.house.files import ROOT, named, project_files

TOP_LEVEL = {"README.md", "DEVELOPERS.md", "Dockerfile", "compose.yaml", "pyproject.toml", "LICENSE"}
TOP_LEVEL |= {"requirements.txt", "requirements-dev.txt", "schemas", "service", "workers", "tests"}
LONGEST_SOURCE_LINES = 450

# Hosts of package registries, folders that exist on one machine only, and talk of how the project came about. A letter
# in brackets keeps this file from holding what it looks for.
FORBIDDEN = re.compile(
    r"[p]ypi\.org|pythonhoste[d]|npm[j]s\.|deb\.debia[n]|(?<![\w.-])/(root|work|farm|tmp/hw|opt/pypi)/"
    r"|transcrip[t]|seed documen[t]|lectur[e]|vide[o]",
    re.IGNORECASE,
)


def test_the_top_level_holds_the_agreed_entries_only() -> None:
    entries = {file.relative_to(ROOT).parts[0] for file in project_files()}
    assert {entry for entry in entries if not entry.startswith(".")} - TOP_LEVEL == set()


def test_no_source_file_is_too_long() -> None:
    sources = [file for file in project_files() if file.suffix == ".py"]
    assert sources
    lengths = {file: len(file.read_text(encoding="utf-8").splitlines()) for file in sources}
    assert named([file for file, lines in lengths.items() if lines > LONGEST_SOURCE_LINES]) == []


def test_every_folder_with_sources_is_a_package() -> None:
    folders = {file.parent for file in project_files() if file.suffix == ".py"}
    assert named(sorted(folder for folder in folders if not (folder / "__init__.py").is_file())) == []


def test_no_file_names_a_registry_or_a_path_of_one_machine() -> None:
    texts = {file: file.read_bytes().decode(encoding="utf-8", errors="replace") for file in project_files()}
    found = {
        str(file.relative_to(ROOT)): match.group() for file, text in texts.items() if (match := FORBIDDEN.search(text))
    }
    assert found == {}


def test_the_search_for_forbidden_text_finds_it() -> None:
    for text in ("https://p_ypi.org/simple", "files.python_hosted.org", "cd /wo_rk/main", "'/ro_ot/.cache'"):
        assert FORBIDDEN.search(text.replace("_", "")), text
    for text in ("a/work/b", "./work/", "/workers/planning", "site/root/"):
        assert not FORBIDDEN.search(text), text
