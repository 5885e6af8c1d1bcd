"""The folder in which the demo leaves what it was given."""

from collections.abc import Iterator
from datetime import datetime
from itertools import chain, count
from pathlib import Path

from schemas.cautions import CAUTIONS

CAUTIONS_FILE = "READ-FIRST.txt"


class CannotKeep(RuntimeError):  # noqa: N818 - says what it is
    """The folder cannot be used; the message is one line for a person."""


class Folder:
    """A folder of one demo: nothing that was there before is written over."""

    def __init__(self, path: Path, *, is_new: bool) -> None:
        self.path = path
        self.names: list[str] = []
        self._is_new = is_new

    @classmethod
    def made(cls, wanted: Path | None, now: datetime) -> "Folder":
        """Make the folder that is wanted, or one in the current folder that bears the time; raises CannotKeep."""
        try:
            if wanted is None:
                return cls(_first_new(now), is_new=True)
            is_new = not wanted.exists()
            wanted.mkdir(parents=True, exist_ok=True)
            if any(wanted.iterdir()):
                raise CannotKeep(f"{wanted} holds files already: name a new folder or an empty one")
        except OSError as fault:
            raise CannotKeep(f"cannot make a folder for the answers: {fault} (--out DIR names another)") from fault
        return cls(wanted, is_new=is_new)

    def keep(self, name: str, content: bytes) -> None:
        """Write a file; the first one brings the cautions with it, since a table has no room for them."""
        if not self.names:
            self._write(CAUTIONS_FILE, ("\n".join(CAUTIONS) + "\n").encode())
        self._write(name, content)

    def leave(self) -> None:
        """Take the folder away where it was made here and nothing is kept in it."""
        if self._is_new and not self.names:
            self.path.rmdir()

    def _write(self, name: str, content: bytes) -> None:
        (self.path / name).write_bytes(content)
        self.names.append(name)


def _first_new(now: datetime) -> Path:
    stem = f"hourwright-demo-{now:%Y%m%d-%H%M%S}"
    for name in _numbered(stem):
        try:
            Path(name).mkdir()
        except FileExistsError:
            continue
        return Path(name)
    raise AssertionError("numbers do not end")


def _numbered(stem: str) -> Iterator[str]:
    return chain([stem], (f"{stem}-{number}" for number in count(2)))
