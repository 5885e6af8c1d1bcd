"""Build answers: media types by `Accept`, entity tags, problem documents, and what every answer carries."""

import hashlib
import json
from collections.abc import Mapping, Sequence
from typing import Any

from flask import Request, Response

from service.web.problems import HttpProblem

JSON = "application/json"
CSV = "text/csv"
PROBLEM = "application/problem+json"
SHOWN_TO_PROGRAMS = {"X-Content-Type-Options": "nosniff", "Cache-Control": "no-store"}


def json_bytes(document: object) -> bytes:
    """Write a document as one line; raises `ValueError` for a number that JSON has no word for."""
    return json.dumps(document, allow_nan=False, ensure_ascii=False, separators=(",", ":")).encode() + b"\n"


SECONDS_UNTIL_THE_STORE_IS_BACK = 2
"""What `Retry-After` says while the store is out of reach."""


def json_answer(document: object, status: int = 200, headers: Mapping[str, str] | None = None) -> Response:
    """Answer with a JSON document."""
    return Response(json_bytes(document), status, headers, content_type=JSON)


def problem_answer(problem: HttpProblem, request_id: str) -> Response:
    """Answer with a problem document."""
    document = json_bytes(problem.document(request_id))
    return Response(document, problem.status, problem.headers, content_type=PROBLEM)


def accepted(request: Request, offers: Sequence[str]) -> str:
    """Choose among the media types offered, the first when the caller has no preference.

    Raises HttpProblem (406) when none is acceptable. A caller who takes problem documents only is given JSON: such a
    document is JSON, and errors come as one anyway.
    """
    header = request.headers.get("Accept", "").strip()
    if not header:
        return offers[0]
    ranges = [_media_range(part) for part in header.split(",")]
    best = max(offers, key=lambda offer: _quality(offer, ranges))  # the first of those that are equal
    if _quality(best, ranges) > 0:
        return best
    if JSON in offers and _quality(PROBLEM, ranges) > 0:
        return JSON
    raise HttpProblem("not-acceptable", f"offered here: {', '.join(offers)}", members={"offers": list(offers)})


def _media_range(text: str) -> tuple[str, float]:
    """Read one entry of `Accept`: a media range and its quality; other parameters are passed over."""
    media, *parameters = (part.strip().lower() for part in text.split(";"))
    quality = 1.0
    for parameter in parameters:
        name, _, value = parameter.partition("=")
        if name.strip() == "q":
            value = value.strip()
            is_number = value.replace(".", "", 1).isdecimal() and value.isascii() and len(value) <= 5
            quality = min(float(value), 1.0) if is_number else 0.0
    return media, quality


def _quality(offer: str, ranges: Sequence[tuple[str, float]]) -> float:
    """Give the quality of the most specific range that an offer falls in; 0 where it falls in none."""
    family = f"{offer.partition('/')[0]}/*"
    for wanted in (offer, family, "*/*"):
        qualities = [quality for media, quality in ranges if media == wanted]
        if qualities:
            return max(qualities)
    return 0.0


def tag_of(*parts: bytes | str) -> str:
    """Make an entity tag of what decides the bytes of an answer."""
    digest = hashlib.sha256()
    for part in parts:
        digest.update((part.encode() if isinstance(part, str) else part) + b"\0")
    return digest.hexdigest()[:32]


def is_unchanged(request: Request, tag: str) -> bool:
    """Tell whether the caller has this very state; raises HttpProblem (412) where it asked for another one."""
    if "If-Match" in request.headers and not request.if_match.contains(tag):
        raise HttpProblem("precondition-failed", "the entity tag in `If-Match` is not the present one")
    return "If-None-Match" in request.headers and request.if_none_match.contains_weak(tag)


def unchanged_answer(tag: str) -> Response:
    """Answer that the caller has the present state already."""
    return Response(status=304, headers={"ETag": f'"{tag}"', "Vary": "Accept"})


def tagged_json(request: Request, document: Any, headers: Mapping[str, str] | None = None) -> Response:
    """Answer with a JSON document under an entity tag of its bytes, or with 304 where the caller has it."""
    body = json_bytes(document)
    tag = tag_of(body)
    if is_unchanged(request, tag):
        return unchanged_answer(tag)
    return Response(body, 200, {"ETag": f'"{tag}"', "Vary": "Accept", **(headers or {})}, content_type=JSON)
