"""Read a body as JSON, and refuse what two readers could read differently (RFC 8259, RFC 7493)."""

import json
import re
from collections import Counter
from collections.abc import Iterator
from typing import Any

from schemas.problems import LONGEST_ECHO, Code, Fault, MalformedJson, pointer, shown

MAX_DEPTH = 32
MAX_NUMBER_CHARACTERS = 400
LARGEST_EXPONENT_DIGITS = 308

_BYTE_ORDER_MARK = b"\xef\xbb\xbf"
_ALL_BUT_STRUCTURE = bytes(byte for byte in range(256) if byte not in b'[]{}"\\')
_ESCAPE = re.compile(rb"\\.", re.DOTALL)
_STRING = re.compile(rb'"[^"]*"')
_OPENED_TOO_OFTEN = re.compile(rb"[\[{]{%d}" % (MAX_DEPTH + 1))
# With fewer than 130 digits in a row and no three in an exponent, a number keeps within its length and a double. The
# first three find what may be large at the speed of a text search, the fourth tells an exponent from a name.
_DIGITS_ALIKE = bytes.maketrans(b"012345678E", b"999999999e")
_MAYBE_TOO_LARGE = (b"e999", b"e+999", b"9" * 130)
_LARGE = re.compile(rb"[9.]e\+?9{3}|9{130}")
_ESCAPED_SURROGATE = re.compile(r"\\u[dD][89a-fA-F]")
_PARSER_WORDS = {
    "Extra data": "text after the end of the document",
    "Invalid control character at": "a control character inside a text",
    "Unterminated string starting at": "a text without an end, begun",
}


class _Doubled(dict[str, Any]):
    """An object in which a member name stands more than once."""

    def __init__(self, members: list[tuple[str, Any]]) -> None:
        super().__init__(members)
        self.doubled = [name for name, count in Counter(name for name, _ in members).items() if count > 1]


class _NotANumber:
    """A number that no double holds, or no number at all."""

    def __init__(self, text: str) -> None:
        self.text = text


def read_json(body: bytes) -> object:
    """Read one JSON document in UTF-8; raises `MalformedJson`, with a line and column or a pointer.

    Refused beside what is no JSON: a byte order mark, a member name given twice, NaN and Infinity, numbers beyond a
    double or longer than 400 characters, lone surrogates, and more than 32 levels.
    """
    if body.startswith(_BYTE_ORDER_MARK):
        raise _malformed("not-utf-8", "the body starts with a byte order mark; send UTF-8 without one")
    try:
        text = body.decode("utf-8")
    except UnicodeDecodeError as fault:
        place = _line_and_column(body[: fault.start].decode("utf-8"))
        raise _malformed("not-utf-8", f"not UTF-8 at {place}") from fault
    if _is_too_deep(body):
        raise _malformed("too-deep", f"arrays and objects are nested more than {MAX_DEPTH} levels deep")
    notes = _Notes()
    document = notes.parse(text, large=_may_hold_a_large_number(body))
    if notes.suspect or _ESCAPED_SURROGATE.search(text):
        faults = list(_flaws(document, ()))
        if faults:
            raise MalformedJson(faults)
    return document


class _Notes:
    """What the parser met that needs a second look."""

    def __init__(self) -> None:
        self.suspect = False

    def parse(self, text: str, *, large: bool) -> Any:
        try:
            return json.loads(
                text,
                object_pairs_hook=self._object,
                parse_constant=self._constant,
                parse_int=self._integer if large else None,
                parse_float=self._float if large else None,
            )
        except json.JSONDecodeError as fault:
            if not text.strip(" \t\r\n"):
                raise _malformed("not-json", "the body is empty") from fault
            place = f"line {fault.lineno}, column {fault.colno}"
            what = _PARSER_WORDS.get(fault.msg, "not JSON")
            raise _malformed("not-json", f"{what} at {place}") from fault
        except RecursionError as fault:
            raise _malformed("too-deep", "arrays and objects are nested too deep") from fault

    def _object(self, members: list[tuple[str, Any]]) -> dict[str, Any]:
        found = dict(members)
        if len(found) == len(members):
            return found
        self.suspect = True
        return _Doubled(members)

    def _constant(self, text: str) -> _NotANumber:
        self.suspect = True
        return _NotANumber(text)

    def _integer(self, text: str) -> int | _NotANumber:
        return int(text) if len(text.lstrip("-")) <= LARGEST_EXPONENT_DIGITS else self._constant(text)

    def _float(self, text: str) -> float | _NotANumber:
        number = float(text)
        fits = abs(number) != float("inf") and len(text) <= MAX_NUMBER_CHARACTERS
        return number if fits else self._constant(text)


def _may_hold_a_large_number(body: bytes) -> bool:
    shape = body.translate(_DIGITS_ALIKE)
    return any(sign in shape for sign in _MAYBE_TOO_LARGE) and _LARGE.search(shape) is not None


def _is_too_deep(body: bytes) -> bool:
    """Tell whether the nesting passes the limit, before a recursive parser meets it.

    What is left of a body without texts and values is brackets. Each pass takes the innermost pairs away: pairs
    that are still there after as many passes as levels are allowed lie deeper, and so do as many unclosed ones.
    """
    brackets = body.translate(None, _ALL_BUT_STRUCTURE)
    if b"\\" in brackets:
        brackets = _ESCAPE.sub(b"", body).translate(None, _ALL_BUT_STRUCTURE)
    brackets = _STRING.sub(b"", brackets)
    if _OPENED_TOO_OFTEN.search(brackets):
        return True
    for _ in range(MAX_DEPTH):
        brackets = brackets.replace(b"[]", b"").replace(b"{}", b"")
    return b"[]" in brackets or b"{}" in brackets


def _flaws(value: Any, place: tuple[str | int, ...]) -> Iterator[Fault]:
    if isinstance(value, dict):
        for name in getattr(value, "doubled", ()):
            yield Fault(
                pointer=pointer(*place, name) if _can_be_shown(name) else pointer(*place),
                code="duplicate-name",
                detail=f"{shown(name) if _can_be_shown(name) else 'a member name'} stands more than once in one object",
            )
        for name, member in value.items():
            if _has_lone_surrogate(name):
                yield _surrogate(place, "a member name")
            yield from _flaws(member, (*place, name) if _can_be_shown(name) else place)
    elif isinstance(value, list):
        for position, member in enumerate(value):
            if isinstance(member, dict | list | str | _NotANumber):
                yield from _flaws(member, (*place, position))
    elif isinstance(value, _NotANumber):
        named = f"`{value.text}` is no number JSON knows" if value.text.isalpha() or value.text == "-Infinity" else None
        yield Fault(
            pointer=pointer(*place),
            code="number-too-large" if named is None else "not-json",
            detail=named or f"a number beyond a double, or longer than {MAX_NUMBER_CHARACTERS} characters",
        )
    elif isinstance(value, str) and _has_lone_surrogate(value):
        yield _surrogate(place, "the text")


def _can_be_shown(name: str) -> bool:
    return len(name) <= LONGEST_ECHO and not _has_lone_surrogate(name)


def _has_lone_surrogate(text: str) -> bool:
    try:
        text.encode("utf-8")
    except UnicodeEncodeError:
        return True
    return False


def _surrogate(place: tuple[str | int, ...], what: str) -> Fault:
    return Fault(pointer=pointer(*place), code="lone-surrogate", detail=f"{what} holds half of a surrogate pair")


def _line_and_column(before: str) -> str:
    return f"line {before.count(chr(10)) + 1}, column {len(before) - before.rfind(chr(10))}"


def _malformed(code: Code, detail: str) -> MalformedJson:
    return MalformedJson([Fault(pointer="", code=code, detail=detail)])
