"""List the project's own files: all that git would be given, found without git, so that an unpacked copy will do."""

from collections.abc import Iterator
from fnmatch import fnmatch
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]


def project_files(folder: Path = ROOT) -> Iterator[Path]:
    """Yield every file below a folder that no line of `.gitignore` leaves out; the lines are names, not paths."""
    ignored = [".git", *(ROOT / ".gitignore").read_text(encoding="utf-8").split()]
    for entry in sorted(folder.iterdir()):
        if any(fnmatch(entry.name, pattern) for pattern in ignored):
            continue
        if entry.is_dir():
            yield from project_files(entry)
        else:
            yield entry


def named(files: list[Path]) -> list[str]:
    """Return the files' paths from the root of the project, for a message."""
    return [str(file.relative_to(ROOT)) for file in files]
