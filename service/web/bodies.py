"""Read a body: counted while it streams in, unpacked within bounds, and parsed once."""

import re
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from threading import BoundedSemaphore
from typing import IO

from flask import Request

from schemas.json_text import read_json
from service.web.problems import HttpProblem
from service.web.settings import MEBIBYTE, WebSettings

_PIECE_BYTES = 64 * 1024
_LARGE_BYTES = 8 * MEBIBYTE
_SECONDS_FOR_A_TURN = 20.0
_JSON_TYPE = re.compile(r"application/json[ \t]*(?:;.*)?", re.IGNORECASE | re.DOTALL)
_CHARSET = re.compile(r';[ \t]*charset[ \t]*=[ \t]*"?([^";, \t]*)"?', re.IGNORECASE)
_GZIP_WINDOW = 31  # zlib: a gzip header and trailer are expected, the window is as large as it may be
_ACCEPTED_CODINGS = "gzip, identity"


class Bodies:
    """Reads bodies under the settings' limits; few large ones at a time, since each takes many times its size."""

    def __init__(self, settings: WebSettings) -> None:
        self._settings = settings
        self._turns = BoundedSemaphore(settings.large_bodies_at_once)

    @contextmanager
    def document(self, request: Request, *, optional: bool = False) -> Iterator[object]:
        """Hold the JSON document of a request; `{}` for an empty body where it is optional.

        Raises HttpProblem for the form and the size of the body, MalformedJson for its text.
        """
        if optional and _is_bodiless(request):
            yield {}
            return
        _require_json(request)
        body = self._read(request)
        is_large = len(body) > _LARGE_BYTES
        if is_large and not self._turns.acquire(timeout=_SECONDS_FOR_A_TURN):
            raise HttpProblem("busy", "other large requests are being read", headers={"Retry-After": "10"})
        try:
            yield read_json(body)
        finally:
            if is_large:
                self._turns.release()

    def _read(self, request: Request) -> bytes:
        coding = request.headers.get("Content-Encoding", "identity").strip().lower()
        if coding not in ("", "identity", "gzip", "x-gzip"):
            detail = "the body may be plain or packed once with gzip"
            raise HttpProblem("unsupported-media-type", detail, headers={"Accept-Encoding": _ACCEPTED_CODINGS})
        limit = self._settings.max_body_bytes
        if (request.content_length or 0) > limit:
            raise _too_large(limit, "the body")
        pieces = _pieces(request.stream, limit)
        if coding in ("", "identity"):
            return b"".join(pieces)
        return _inflated(pieces, self._settings.max_inflated_bytes)


def _is_bodiless(request: Request) -> bool:
    return not request.content_length and "Transfer-Encoding" not in request.headers


def _require_json(request: Request) -> None:
    given = request.headers.get("Content-Type", "")
    charset = _CHARSET.search(given)
    if not _JSON_TYPE.fullmatch(given.strip()) or (charset and charset[1].lower() not in ("utf-8", "utf8")):
        said = "application/json in UTF-8 is read here"
        detail = said if given else f"there is no Content-Type; {said}"
        raise HttpProblem(
            "unsupported-media-type", detail, headers={"Accept": "application/json", "Accept-Post": "application/json"}
        )


def _pieces(stream: IO[bytes], limit: int) -> Iterator[bytes]:
    """Give the body piece by piece; a server that cuts it at a limit of its own would make it another document."""
    received = 0
    while piece := stream.read(_PIECE_BYTES):
        received += len(piece)
        if received > limit:
            raise _too_large(limit, "the body")
        yield piece


def _inflated(pieces: Iterator[bytes], limit: int) -> bytes:
    unpack = zlib.decompressobj(_GZIP_WINDOW)
    found: list[bytes] = []
    size = 0

    def take(packed: bytes) -> bytes:
        """Unpack a little, and give back what is still to be unpacked."""
        nonlocal size
        found.append(unpack.decompress(packed, MEBIBYTE))
        size += len(found[-1])
        if size > limit:
            raise _too_large(limit, "the unpacked body")
        return unpack.unconsumed_tail

    try:
        for piece in pieces:
            waiting = piece
            while waiting and not unpack.eof:
                waiting = take(waiting)
            if waiting or unpack.unused_data:
                raise HttpProblem("unreadable-body", "something follows the gzip stream")
        while not unpack.eof:  # What was taken in may be unpacked in part only.
            before = size
            take(b"")
            if size == before:
                raise HttpProblem("unreadable-body", "the gzip stream ends too early")
    except zlib.error as fault:
        raise HttpProblem("unreadable-body", "the body is no gzip stream") from fault
    return b"".join(found)


def _too_large(limit: int, what: str) -> HttpProblem:
    return HttpProblem("body-too-large", f"{what} is larger than {limit // MEBIBYTE} MiB", members={"max_bytes": limit})
