"""Cursors of lists: where to go on, opaque to the caller."""

import base64
import binascii

from service.store import BadCursor


def write_cursor(kind: str, *place: str) -> str:
    """Write a place in a list of a kind as a cursor."""
    return base64.urlsafe_b64encode("\n".join((kind, *place)).encode()).decode().rstrip("=")


def read_cursor(cursor: str, kind: str, parts: int) -> list[str]:
    """Read a cursor of a list of this kind; raises BadCursor for anything that `write_cursor` did not write for it."""
    try:
        text = base64.b64decode(cursor + "=" * (-len(cursor) % 4), altchars=b"-_", validate=True).decode()
    except (binascii.Error, ValueError) as fault:
        raise BadCursor(cursor) from fault
    found, *place = text.split("\n")
    if found != kind or len(place) != parts or write_cursor(kind, *place) != cursor:
        raise BadCursor(cursor)
    return place
