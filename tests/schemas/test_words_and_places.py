"""Every word of pydantic's has one of ours, and every place it names one in the document sent."""

from typing import get_args

import pytest
from pydantic_core._pydantic_core import list_all_errors
from pydantic_core.core_schema import ErrorType

from schemas.error_words import OWN_WORDS, WORDS, code_and_detail
from schemas.job import Job
from schemas.places import place_of
from schemas.problems import PROBLEM_TYPES, Code, Fault, InvalidRequest, MalformedJson, Problem, Unsupported, pointer

CODES = set(get_args(Code))


def test_every_error_pydantic_knows_has_a_word() -> None:
    known = {error["type"] for error in list_all_errors()}
    assert known == set(get_args(ErrorType))
    assert known - WORDS.keys() == set()


def test_every_word_is_a_code_and_writes_its_detail() -> None:
    for error in list_all_errors():
        context = error.get("example_context") or {}
        code, detail = code_and_detail({"type": error["type"], "loc": (), "msg": "", "input": None, "ctx": context})
        assert code in CODES
        assert detail.strip()
    assert set(OWN_WORDS.values()) <= CODES


def test_a_word_that_is_not_in_the_table_is_an_error() -> None:
    with pytest.raises(KeyError):
        code_and_detail({"type": "invented", "loc": (), "msg": "", "input": None})


def test_every_refusal_has_a_problem_type_and_every_type_a_refusal() -> None:
    refusals = {refusal.problem_type: refusal for refusal in (MalformedJson, InvalidRequest, Unsupported)}
    assert refusals.keys() == PROBLEM_TYPES.keys()
    assert {meaning.status for meaning in PROBLEM_TYPES.values()} == {400, 422}
    for refusal in refusals.values():
        assert isinstance(refusal([Fault("", "missing", "x")]).problem(), Problem)


# Source: RFC 6901, section 5, the JSON string representations of its examples.
@pytest.mark.parametrize(
    ("steps", "written"),
    [((), ""), (("foo", 0), "/foo/0"), (("",), "/"), (("a/b",), "/a~1b"), (("m~n",), "/m~0n"), ((" ",), "/ ")],
)
def test_pointers_are_written_as_published(steps: tuple[str | int, ...], written: str) -> None:
    assert pointer(*steps) == written


@pytest.mark.parametrize(
    ("loc", "kind", "steps"),
    [
        (("<schedule>", "fleet", "assets", 0, "<storage>", "id"), "missing", ("fleet", "assets", 0, "id")),
        (("<schedule>", "<schedule>"), "extra_forbidden", ("<schedule>",)),
        (("<schedule>", "initial", "<x>", "[key]"), "string_pattern_mismatch", ("initial", "<x>")),
        (("<schedule>", "initial", "[key]", "[key]"), "string_pattern_mismatch", ("initial", "[key]")),
        (("<schedule>", "initial", "[key]", "[key]"), "extra_forbidden", ("initial", "[key]", "[key]")),
        (("<schedule>", "window", "price_per_mwh", "<series>", 3), "float_type", ("window", "price_per_mwh", 3)),
        (("<schedule>", "forecasts", "<number>", "<series>", 3), "float_type", ("forecasts", "<number>", 3)),
        (
            ("<schedule>", "counted_before", "commitments", "<by-asset>", "<by-asset>", "<by-asset>"),
            "less_than",
            ("counted_before", "commitments", "<by-asset>", "<by-asset>"),
        ),
        (("<sequence>", "windows", 1, "<window>", "start"), "not_text", ("windows", 1, "start")),
        (("<sequence>", "windows", 1, "<id>"), "string_pattern_mismatch", ("windows", 1)),
        (
            ("<schedule>", "commitments", 2, "<hours_at_least>", "excused", 0, "to"),
            "missing",
            ("commitments", 2, "excused", 0, "to"),
        ),
        ((), "union_tag_not_found", ()),
    ],
)
def test_tags_are_told_from_member_names(loc: tuple[str | int, ...], kind: str, steps: tuple[str | int, ...]) -> None:
    assert place_of(Job, loc, kind).steps == steps
