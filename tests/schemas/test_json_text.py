"""Bodies that two readers could read differently are refused, with a place, and never with another error."""

import json
import sys

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from schemas.json_text import MAX_DEPTH, read_json
from schemas.problems import MalformedJson
from tests.schemas.documents import plain

DEEP = MAX_DEPTH + 1

# body -> (code, pointer, a part of the detail)
HOSTILE: dict[str, tuple[bytes, str, str, str]] = {
    "empty": (b"", "not-json", "", "empty"),
    "blank": (b" \n\t ", "not-json", "", "empty"),
    "byte order mark": (b"\xef\xbb\xbf{}", "not-utf-8", "", "byte order mark"),
    "sixteen-bit text": ('{"a":1}'.encode("utf-16"), "not-utf-8", "", "line 1, column 1"),
    "sixteen-bit text without a mark": ('{"a":1}'.encode("utf-16-le"), "not-json", "", "line 1"),
    "a byte of another encoding": (b'{\n "a": "\xe9"}', "not-utf-8", "", "line 2, column 8"),
    "a surrogate as bytes": (b'"\xed\xa0\x80"', "not-utf-8", "", "line 1, column 2"),
    "an overlong form": (b'"\xc0\xaf"', "not-utf-8", "", "line 1, column 2"),
    "text behind": (b'{"a":1} x', "not-json", "", "line 1, column 9"),
    "two documents": (b"{}{}", "not-json", "", "after the end"),
    "a trailing comma": (b'{"a":1,}', "not-json", "", "line 1"),
    "a trailing comma in an array": (b"[1,\n]", "not-json", "", "line"),
    "single quotes": (b"{'a':1}", "not-json", "", "column 2"),
    "a comment": (b"{} // x", "not-json", "", "column 4"),
    "a bare name": (b"{a:1}", "not-json", "", "column 2"),
    "an unclosed object": (b'{"a":1', "not-json", "", "line 1"),
    "an unclosed text": (b'{"a":"x', "not-json", "", "without an end"),
    "a text full of brackets without an end": (b'{"a":"' + b"[" * 20, "not-json", "", "without an end"),
    "a control character": (b'"a\x00b"', "not-json", "", "control character"),
    "a line end in a text": (b'"a\nb"', "not-json", "", "control character"),
    "an unknown escape": (b'"\\x41"', "not-json", "", "line 1"),
    "a leading zero": (b"[01]", "not-json", "", "line 1"),
    "a plus sign": (b"[+1]", "not-json", "", "line 1"),
    "a bare point": (b"[.5]", "not-json", "", "line 1"),
    "hexadecimal": (b"[0x1]", "not-json", "", "line 1"),
    "not a number": (b'{"a":[1,NaN]}', "not-json", "/a/1", "NaN"),
    "infinity": (b'{"a":Infinity}', "not-json", "/a", "Infinity"),
    "negative infinity": (b'{"a":-Infinity}', "not-json", "/a", "-Infinity"),
    "an exponent beyond a double": (b'{"a":1e999}', "number-too-large", "/a", "double"),
    "a large exponent, signed": (b'{"a":-1.5E+0309}', "number-too-large", "/a", "double"),
    "a whole number beyond a double": (b'{"a":1' + b"0" * 309 + b"}", "number-too-large", "/a", "double"),
    "five thousand digits": (b'{"a":' + b"7" * 5_000 + b"}", "number-too-large", "/a", "double"),
    "five thousand decimals": (b'{"a":0.' + b"7" * 5_000 + b"}", "number-too-large", "/a", "400"),
    "a name twice": (b'{"a":{"b":1,"b":1}}', "duplicate-name", "/a/b", "`b`"),
    "a name twice, once in escapes": (b'{"b":1,"\\u0062":2}', "duplicate-name", "/b", "`b`"),
    "a name twice in the last of many": (b'[{"b":1},{"b/~":1,"b/~":2}]', "duplicate-name", "/1/b~1~0", "`b/~`"),
    "a long name twice": (b'{"' + b"x" * 101 + b'":1,"' + b"x" * 101 + b'":1}', "duplicate-name", "", "more than once"),
    "not a number under a long name": (b'{"' + b"x" * 101 + b'":NaN}', "not-json", "", "NaN"),
    "half a surrogate pair": (b'{"a":"\\ud800"}', "lone-surrogate", "/a", "half"),
    "the other half": (b'{"a":["\\udc00x"]}', "lone-surrogate", "/a/0", "half"),
    "halves the wrong way round": (b'"\\udc00\\ud800"', "lone-surrogate", "", "half"),
    "half a pair in a name": (b'{"\\ud800":1}', "lone-surrogate", "", "name"),
    "arrays too deep": (b"[" * DEEP + b"]" * DEEP, "too-deep", "", str(MAX_DEPTH)),
    "objects too deep": (b'{"a":' * DEEP + b"1" + b"}" * DEEP, "too-deep", "", str(MAX_DEPTH)),
    "far too deep": (b"[" * 1_000_000 + b"]" * 1_000_000, "too-deep", "", str(MAX_DEPTH)),
    "far too deep and unclosed": (b'{"a":[' * 500_000, "too-deep", "", str(MAX_DEPTH)),
    "deep behind brackets in texts": (b'["]]]",' * DEEP + b"1" + b"]" * DEEP, "too-deep", "", str(MAX_DEPTH)),
    "deep behind a quote in a text": (b'["\\"[",' * DEEP + b"1" + b"]" * DEEP, "too-deep", "", str(MAX_DEPTH)),
    "deep behind other brackets": (b"[[],{}," * DEEP + b"1" + b"]" * DEEP, "too-deep", "", str(MAX_DEPTH)),
}


@pytest.mark.parametrize(("body", "code", "pointer", "words"), HOSTILE.values(), ids=HOSTILE.keys())
def test_a_hostile_body_is_refused_with_its_place(body: bytes, code: str, pointer: str, words: str) -> None:
    with pytest.raises(MalformedJson) as refused:
        read_json(body)
    (fault,) = refused.value.faults
    assert (fault.code, fault.pointer) == (code, pointer)
    assert words in fault.detail
    assert refused.value.problem().status == 400


def test_every_flaw_is_named_in_one_answer() -> None:
    with pytest.raises(MalformedJson) as refused:
        read_json(b'{"a":NaN,"b":{"c":1,"c":1e400},"d":["\\ud800"]}')
    named = {(fault.pointer, fault.code) for fault in refused.value.faults}
    assert named == {
        ("/a", "not-json"),
        ("/b/c", "duplicate-name"),
        ("/b/c", "number-too-large"),
        ("/d/0", "lone-surrogate"),
    }


@pytest.mark.parametrize(
    ("body", "read"),
    [
        (b" [1, -0.5e-3, 1E5]\r\n", [1, -0.0005, 1e5]),
        (b'"\\ud83d\\ude00\\u00e9"', "\U0001f600\u00e9"),
        (b'{"e999":"NaN 1e999 [[[["}', {"e999": "NaN 1e999 [[[["}),
        (b'{"a\\\\":"\\"{"}', {"a\\": '"{'}),
        (b"[1.7976931348623157e308, 1e-400]", [1.7976931348623157e308, 0.0]),
        (b"[9007199254740993]", [9007199254740993]),
        (b"1" + b"0" * 300, 10**300),
        (b"[" * MAX_DEPTH + b"]" * MAX_DEPTH, json.loads("[" * MAX_DEPTH + "]" * MAX_DEPTH)),
        (b"null", None),
    ],
)
def test_a_sound_body_is_read(body: bytes, read: object) -> None:
    assert read_json(body) == read


def test_a_reader_called_deep_in_the_stack_says_so_as_a_fault() -> None:
    body = b"[" * MAX_DEPTH + b"]" * MAX_DEPTH

    def descend(levels: int) -> str:
        if levels:
            return descend(levels - 1)
        try:
            read_json(body)
        except MalformedJson as refused:
            return refused.faults[0].code
        return "read"

    room = sys.getrecursionlimit()
    outcomes = set()
    for levels in range(room, 0, -1):
        try:
            outcomes.add(descend(levels))
        except RecursionError:
            continue
        break
    assert outcomes <= {"read", "too-deep"}
    assert outcomes


@settings(deadline=None)
@given(st.integers(0, 2_000), st.integers(0, 255), st.booleans())
def test_any_changed_byte_gives_a_document_or_a_refusal(place: int, byte: int, is_inserted: bool) -> None:
    body = bytearray(json.dumps(plain()).encode())
    place %= len(body)
    body[place : place if is_inserted else place + 1] = bytes([byte])
    try:
        document = read_json(bytes(body))
    except MalformedJson as refused:
        problem = refused.problem()
    else:
        assert document == json.loads(body)
        return
    assert problem.errors


@settings(deadline=None)
@given(
    st.recursive(
        st.none() | st.booleans() | st.integers(-9, 9) | st.text(),
        lambda inner: st.lists(inner) | st.dictionaries(st.text(), inner),
    )
)
def test_what_is_written_is_read_back(document: object) -> None:
    assert read_json(json.dumps(document, ensure_ascii=False).encode("utf-8", "surrogatepass")) == document
