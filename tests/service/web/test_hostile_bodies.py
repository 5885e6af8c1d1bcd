"""Bodies that mean harm, over a real socket: each has its exact status, none is a 500, and the server lives on."""

import gzip
import json
import socket
import zlib

import pytest

from service.web.settings import MEBIBYTE, WebSettings
from tests.schemas.documents import plain
from tests.service.web.live import SMALL, Answered, House

PLAIN = json.dumps(plain()).encode()
LIMIT = SMALL.max_body_bytes
JSON = b"application/json"


def posted(body: bytes, *headers: bytes, media: bytes | None = JSON, path: bytes = b"/v1/jobs/validate") -> bytes:
    """Write a request whose length is right."""
    lines = [b"POST " + path + b" HTTP/1.1", b"Host: 127.0.0.1", b"Connection: close"]
    lines += [b"Content-Type: " + media] if media is not None else []
    lines += [b"Content-Length: %d" % len(body), *headers]
    return b"\r\n".join(lines) + b"\r\n\r\n" + body


def chunked(*chunks: bytes, end: bytes = b"0\r\n\r\n", head: bytes = b"") -> bytes:
    lines = [b"POST /v1/jobs/validate HTTP/1.1", b"Host: h", b"Content-Type: application/json"]
    lines += [b"Connection: close", b"Transfer-Encoding: chunked", *([head] if head else [])]
    body = b"".join(b"%x\r\n%s\r\n" % (len(chunk), chunk) for chunk in chunks)
    return b"\r\n".join(lines) + b"\r\n\r\n" + body + end


def put_in(pointer_text: bytes, value: bytes) -> bytes:
    """Put raw text in place of a value of the plain request."""
    assert pointer_text in PLAIN
    return PLAIN.replace(pointer_text, value, 1)


EFFICIENCY = b'"charge_efficiency": 0.95'
PRICES = b"[50.0, 60.0, 70.0, 80.0]"
ID = b'"id": "b1"'
STORED = b'"stored_mwh": 4.0'


def efficiency(text: bytes) -> bytes:
    return put_in(EFFICIENCY, b'"charge_efficiency": ' + text)


NOT_JSON: dict[str, bytes] = {
    "empty": b"",
    "blank": b" \r\n\t ",
    "cut short": PLAIN[:-1],
    "text after the end": PLAIN + b"{}",
    "two documents": PLAIN + b"\n" + PLAIN,
    "a trailing comma": b'{"a": 1,}',
    "single quotes": b"{'a': 1}",
    "a comment": b'{"a": 1} // one',
    "a bare word": b"schedule",
    "NUL": b"\0",
    "NUL behind the document": PLAIN + b"\0",
    "a byte order mark": b"\xef\xbb\xbf" + PLAIN,
    "UTF-16": PLAIN.decode().encode("utf-16"),
    "UTF-16 without a mark": PLAIN.decode().encode("utf-16-le"),
    "UTF-32": PLAIN.decode().encode("utf-32"),
    "Latin-1": put_in(ID, '"id": "bé"'.encode("latin-1")),
    "overlong UTF-8": put_in(ID, b'"id": "\xc0\xaf"'),
    "a raw surrogate": put_in(ID, b'"id": "\xed\xa0\x80"'),
    "a lone surrogate": put_in(ID, b'"id": "\\ud800"'),
    "a lone surrogate as a name": put_in(ID, b'"\\udfff": 1, "id": "b1"'),
    "a raw control character": put_in(ID, b'"id": "b\x01"'),
    "a name given twice": put_in(ID, b'"id": "b1", "id": "b2"'),
    "a name given twice with escapes": put_in(ID, b'"id": "b1", "\\u0069d": "b2"'),
    "the task given twice": put_in(b'{"fleet"', b'{"task": "schedule", "task": "check", "fleet"'),
    "NaN": efficiency(b"NaN"),
    "Infinity": efficiency(b"Infinity"),
    "-Infinity": efficiency(b"-Infinity"),
    "1e999": efficiency(b"1e999"),
    "-1e999": efficiency(b"-1e999"),
    "an integer of 5000 digits": efficiency(b"9" * 5000),
    "an integer of 400 digits": efficiency(b"1" * 400),
    "a fraction of 100000 digits": efficiency(b"0." + b"3" * 100_000 + b"e500"),
    "a leading zero": efficiency(b"00.95"),
    "a plus sign": efficiency(b"+0.95"),
    "a hexadecimal number": efficiency(b"0x1"),
    "deep arrays": b"[" * 100_000,
    "deep arrays that end": b"[" * 100_000 + b"]" * 100_000,
    "deep objects": b'{"a":' * 50_000 + b"1" + b"}" * 50_000,
    "33 levels": b"[" * 33 + b"]" * 33,
}

INVALID: dict[str, bytes] = {
    "null": b"null",
    "an array": b"[]",
    "a string": b'"schedule"',
    "a number": b"7",
    "nothing in it": b"{}",
    "an unknown task": put_in(b'{"fleet"', b'{"task": "conquer", "fleet"'),
    "a task that is a number": put_in(b'{"fleet"', b'{"task": 5, "fleet"'),
    "a task that is an object": put_in(b'{"fleet"', b'{"task": {}, "fleet"'),
    "an unknown field": put_in(EFFICIENCY, b'"charge_eficiency": 0.95'),
    "a number as text": efficiency(b'"0.95"'),
    "NaN as text": efficiency(b'"NaN"'),
    "truth as a number": efficiency(b"true"),
    "a number beyond its range": efficiency(b"1e308"),
    "a huge but finite integer": efficiency(b"9" * 300),
    "null for what is required": efficiency(b"null"),
    "null in a series": put_in(PRICES, b"[50.0, null, 70.0, 80.0]"),
    "an object for a series": put_in(PRICES, b'{"0": 50.0}'),
    "arrays in a series": put_in(PRICES, b"[[[[[[[[1]]]]]]]]"),
    "a NUL in an id": put_in(ID, b'"id": "b1\\u0000"'),
    "a line end in an id": put_in(ID, b'"id": "b1\\n"'),
    "an id of a mebibyte": put_in(ID, b'"id": "' + b"b" * 900_000 + b'"'),
    "the word of the fleet as an id": PLAIN.replace(b'"b1"', b'"fleet"'),
    "an infinite number behind null": put_in(STORED, b'"stored_mwh": 4.0, "state_of_charge_percent": 1e300'),
    "a time without an offset": put_in(b"2027-03-14T00:00:00+00:00", b"2027-03-14T00:00:00"),
    "an epoch number as a time": put_in(b'"2027-03-14T00:00:00+00:00"', b"1700000000"),
    "a time zone that climbs the tree": put_in(b"Europe/Lisbon", b"../../etc/passwd"),
    "a time zone with a NUL": put_in(b"Europe/Lisbon", b"Europe/\\u0000"),
    "a year beyond all calendars": put_in(b"2027-03-14T00:00:00+00:00", b"9999-12-31T23:59:59-23:59"),
    "an interval of a month": put_in(b"PT60M", b"P1M"),
    "more intervals than the limit": put_in(PRICES, b"[" + b"1," * 3000 + b"1]"),
    "300000 unknown members": b"{" + b",".join(b'"a%d":1' % n for n in range(70_000)) + b"}",
    "a prototype": put_in(ID, b'"__proto__": {}, "__class__": {}, "id": "b1"'),
    "a fleet by an id that is no id": put_in(b'{"fleet"', b'{"fleet_id": "../x", "fleet"'),
    "a stored fleet that is not there": b'{"fleet_id": "nowhere", "window_id": "nowhere-either"}',
}


def _gzipped(body: bytes) -> bytes:
    return gzip.compress(body, 1)


PACKED: dict[str, tuple[bytes, int, str]] = {
    "gzip": (posted(_gzipped(PLAIN), b"Content-Encoding: gzip"), 200, ""),
    "x-gzip": (posted(_gzipped(PLAIN), b"Content-Encoding: X-GZIP"), 200, ""),
    "identity": (posted(PLAIN, b"Content-Encoding: identity"), 200, ""),
    "no gzip": (posted(PLAIN, b"Content-Encoding: gzip"), 400, "unreadable-body"),
    "gzip, cut short": (posted(_gzipped(PLAIN)[:-9], b"Content-Encoding: gzip"), 400, "unreadable-body"),
    "gzip with a wrong checksum": (
        posted(_gzipped(PLAIN)[:-8] + b"\0" * 8, b"Content-Encoding: gzip"), 400, "unreadable-body",
    ),
    "gzip with something behind it": (
        posted(_gzipped(PLAIN) + b"more", b"Content-Encoding: gzip"), 400, "unreadable-body",
    ),
    "gzip twice over": (posted(_gzipped(PLAIN) * 2, b"Content-Encoding: gzip"), 400, "unreadable-body"),
    "no body, said to be gzip": (posted(b"", b"Content-Encoding: gzip"), 400, "unreadable-body"),
    "a gzip bomb": (posted(_gzipped(b" " * (64 * MEBIBYTE)), b"Content-Encoding: gzip"), 413, "body-too-large"),
    "a gzip bomb within JSON": (
        posted(_gzipped(b"[" + b"0," * (8 * MEBIBYTE) + b"0]"), b"Content-Encoding: gzip"), 413, "body-too-large",
    ),
    "zlib": (posted(zlib.compress(PLAIN), b"Content-Encoding: deflate"), 415, "unsupported-media-type"),
    "br": (posted(PLAIN, b"Content-Encoding: br"), 415, "unsupported-media-type"),
    "stacked codings": (
        posted(_gzipped(_gzipped(PLAIN)), b"Content-Encoding: gzip, gzip"), 415, "unsupported-media-type",
    ),
    "stacked codings in two headers": (
        posted(_gzipped(PLAIN), b"Content-Encoding: gzip", b"Content-Encoding: identity"), 415,
        "unsupported-media-type",
    ),
}  # fmt: skip

MEDIA: dict[str, tuple[bytes, int, str]] = {
    "a charset": (posted(PLAIN, media=b'application/json; charset="UTF-8"'), 200, ""),
    "upper case": (posted(PLAIN, media=b"APPLICATION/JSON"), 200, ""),
    "another parameter": (posted(PLAIN, media=b"application/json; profile=x"), 200, ""),
    "no media type": (posted(PLAIN, media=None), 415, "unsupported-media-type"),
    "an empty media type": (posted(PLAIN, media=b""), 415, "unsupported-media-type"),
    "text": (posted(PLAIN, media=b"text/plain"), 415, "unsupported-media-type"),
    "a form": (posted(b"fleet=1", media=b"application/x-www-form-urlencoded"), 415, "unsupported-media-type"),
    "parts": (posted(b"--x--", media=b"multipart/form-data; boundary=x"), 415, "unsupported-media-type"),
    "JSON of another kind": (posted(PLAIN, media=b"application/merge-patch+json"), 415, "unsupported-media-type"),
    "a longer word": (posted(PLAIN, media=b"application/jsonx"), 415, "unsupported-media-type"),
    "another charset": (posted(PLAIN, media=b"application/json; charset=utf-16"), 415, "unsupported-media-type"),
    "two media types": (
        posted(PLAIN, b"Content-Type: text/plain"), 415, "unsupported-media-type",
    ),
}  # fmt: skip

HEAD = b"POST /v1/jobs/validate HTTP/1.1\r\nHost: h\r\nContent-Type: application/json\r\n"
FRAMED: dict[str, tuple[bytes, int, str]] = {
    "chunks": (chunked(PLAIN[:9], PLAIN[9:]), 200, ""),
    "a chunk for each byte": (chunked(*(PLAIN[n : n + 1] for n in range(len(PLAIN)))), 200, ""),
    "a body over the limit": (posted(b" " * (LIMIT + 1)), 413, "body-too-large"),
    "a body at the limit": (posted(PLAIN.ljust(LIMIT)), 200, ""),
    "chunks over the limit": (chunked(*([b" " * 65_536] * (LIMIT // 65_536 + 1))), 413, "body-too-large"),
    "chunks far over the limit": (chunked(*([b" " * 65_536] * (4 * LIMIT // 65_536))), 413, "body-too-large"),
    "chunks at the limit": (chunked(PLAIN.ljust(LIMIT // 2), b" " * (LIMIT - LIMIT // 2)), 200, ""),
    "a length far over the limit": (HEAD + b"Content-Length: 99999999999\r\n\r\n", 413, "body-too-large"),
    "a length of 5000 digits": (HEAD + b"Content-Length: " + b"9" * 5000 + b"\r\n\r\n", 400, "bad-request"),
    "a negative length": (HEAD + b"Content-Length: -1\r\n\r\n", 400, "bad-request"),
    "a length with a plus sign": (HEAD + b"Content-Length: +2\r\n\r\n{}", 400, "bad-request"),
    "a length that is no number": (HEAD + b"Content-Length: many\r\n\r\n", 400, "bad-request"),
    "two lengths": (HEAD + b"Content-Length: 2\r\nContent-Length: 3\r\n\r\n{} ", 400, "bad-request"),
    "the same length twice": (HEAD + b"Content-Length: 2\r\nContent-Length: 2\r\n\r\n{}", 400, "bad-request"),
    "a length beside chunks": (chunked(PLAIN, head=b"Content-Length: 5"), 400, "bad-request"),
    "no length": (HEAD + b"Connection: close\r\n\r\n", 400, "malformed-json"),
    "a transfer coding that is none": (HEAD + b"Transfer-Encoding: gzip\r\n\r\n", 501, "not-implemented"),
    "chunked within gzip": (HEAD + b"Transfer-Encoding: chunked, gzip\r\n\r\n", 501, "not-implemented"),
    "a chunk size that is no number": (chunked(end=b"zz\r\n{}\r\n0\r\n\r\n"), 400, "bad-request"),
    "a negative chunk size": (chunked(end=b"-2\r\n{}\r\n0\r\n\r\n"), 400, "bad-request"),
    "a chunk without its end": (chunked(end=b"2\r\n{}XX\r\n0\r\n\r\n"), 400, "bad-request"),
    "a chunk size without an end": (chunked(end=b"0" * 5000), 400, "bad-request"),
    "a trailer without an end": (chunked(PLAIN, end=b"0\r\n" + b"x" * 20_000), 400, "bad-request"),
    "a header name with a blank": (HEAD + b"Bad Header: 1\r\n\r\n", 400, "bad-request"),
    "a bare line feed in the headers": (HEAD + b"A: b\nc: d\r\n\r\n", 400, "bad-request"),
    "headers over the limit": (HEAD + b"A: " + b"a" * 20_000 + b"\r\n\r\n", 431, "headers-too-large"),
    "headers far over the limit": (HEAD + b"A: " + b"a" * 200_000 + b"\r\n\r\n", 431, "headers-too-large"),
    "2000 headers": (HEAD + b"A: b\r\n" * 8000 + b"\r\n", 431, "headers-too-large"),
}


@pytest.mark.parametrize("name", NOT_JSON)
def test_what_is_no_json_document_is_refused_as_malformed(house: House, name: str) -> None:
    answered = _exact(house, posted(NOT_JSON[name]), 400, "malformed-json")
    assert answered.document["errors"]


@pytest.mark.parametrize("name", INVALID)
def test_what_breaks_the_contract_is_refused_as_invalid(house: House, name: str) -> None:
    answered = _exact(house, posted(INVALID[name]), 422, "invalid-request")
    assert answered.document["errors"]
    assert len(answered.body) < 64 * 1024


@pytest.mark.parametrize("name", PACKED)
def test_a_packed_body_is_unpacked_within_bounds_or_refused(house: House, name: str) -> None:
    message, status, problem = PACKED[name]
    answered = _exact(house, message, status, problem)
    if status == 415:
        assert answered.headers["accept-encoding"] == "gzip, identity"


@pytest.mark.parametrize("name", MEDIA)
def test_only_json_in_utf_8_is_read(house: House, name: str) -> None:
    message, status, problem = MEDIA[name]
    answered = _exact(house, message, status, problem)
    if status == 415:
        assert answered.headers["accept"] == "application/json"


@pytest.mark.parametrize("name", FRAMED)
def test_a_message_that_is_framed_wrong_or_too_large_is_refused(house: House, name: str) -> None:
    message, status, problem = FRAMED[name]
    _exact(house, message, status, problem)


@pytest.mark.parametrize(
    "message",
    [
        posted(PLAIN)[:-10],
        chunked(PLAIN, end=b""),
        HEAD,
        HEAD[:20],
        b"",
        b"\r\n\r\n",
    ],
    ids=["half a body", "chunks without an end", "half a header", "half a line", "nothing", "blank lines"],
)
def test_a_message_that_ends_early_is_dropped_without_an_answer(house: House, message: bytes) -> None:
    with socket.create_connection(("127.0.0.1", house.port), 20) as line:
        line.sendall(message)
        line.shutdown(socket.SHUT_WR)
        assert line.recv(1) == b""
    assert house.call("GET", "/health/live").status == 200


def test_the_default_limits_are_those_of_the_contract() -> None:
    settings = WebSettings()
    assert settings.max_body_bytes == 64 * 1024 * 1024
    assert settings.max_inflated_bytes == 256 * 1024 * 1024
    assert settings.longest_wait_seconds == 30


@pytest.mark.parametrize("path", [b"/v1/jobs", b"/v1/jobs/validate"])
@pytest.mark.parametrize("body", [b"", b"\xff", b"[", PLAIN + b"x"])
def test_submission_and_validation_read_bodies_alike(house: House, path: bytes, body: bytes) -> None:
    _exact(house, posted(body, path=path), 400, "malformed-json")


def _exact(house: House, message: bytes, status: int, problem: str) -> Answered:
    answered = house.say(message)
    assert answered is not None
    assert answered.status == status, answered
    if problem:
        assert answered.problem == problem, answered
    assert answered.headers["x-content-type-options"] == "nosniff"
    assert house.call("GET", "/health/live").status == 200
    return answered
