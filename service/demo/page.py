"""Print for a person to read."""

import textwrap
from collections.abc import Iterable
from typing import TextIO

WIDTH = 100


class Page:
    """Prints paragraphs and tables of 100 columns, in whatever the stream can write."""

    def __init__(self, stream: TextIO) -> None:
        self._stream = stream

    def title(self, text: str) -> None:
        """Print a line that stands out."""
        self._print([f"== {text} ".ljust(WIDTH, "=")])

    def heading(self, text: str) -> None:
        """Print the head of a part."""
        self._print(["", text.upper()])

    def words(self, *paragraphs: str) -> None:
        """Print paragraphs, broken into lines."""
        for paragraph in paragraphs:
            self._print(textwrap.wrap(paragraph, WIDTH, subsequent_indent="  " if paragraph.startswith("- ") else ""))

    def table(self, lines: Iterable[str]) -> None:
        """Print lines as they are."""
        self._print(line.rstrip() for line in lines)

    def _print(self, lines: Iterable[str]) -> None:
        encoding = self._stream.encoding or "ascii"
        for line in lines:
            print(line.encode(encoding, "backslashreplace").decode(encoding), file=self._stream)
        self._stream.flush()
