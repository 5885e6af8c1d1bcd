"""Read a job: from bytes to a document, from a document to a `Job`, with every fault found in one answer."""

from collections.abc import Iterator, Mapping
from difflib import get_close_matches
from functools import cache
from itertools import islice

from pydantic import TypeAdapter, ValidationError
from pydantic_core import ErrorDetails

from schemas.checks import faults_of
from schemas.document import FaultBudget
from schemas.error_words import OWN_WORDS, code_and_detail
from schemas.job import Job
from schemas.json_text import read_json
from schemas.places import place_of
from schemas.problems import Fault, InvalidRequest, pointer

__all__ = ["canonical", "read_job", "read_json"]

MOST_FAULTS_KEPT = 1_000
# Documents within documents count the same fault once each, four levels at most.
MOST_FAULTS_SOUGHT = 4 * MOST_FAULTS_KEPT
_NAME_LIKENESS = 0.7


def read_job(document: object) -> Job:
    """Read a job from a parsed JSON document; raises `InvalidRequest` with the first 1,000 faults.

    Where members are malformed in themselves, the rules across members are still tried on what is left, so that one
    answer names as much as can be known.
    """
    try:
        job = _contract().validate_python(document, context=FaultBudget(MOST_FAULTS_SOUGHT))
    except ValidationError as wrong:
        errors = wrong.errors(include_url=False, include_input=False)
        faults = [_fault(error, document) for error in errors[:MOST_FAULTS_KEPT]]
        faults.extend(_faults_across_the_rest(document, errors))
        raise InvalidRequest(faults[:MOST_FAULTS_KEPT]) from None
    if crossing := list(islice(faults_of(job), MOST_FAULTS_KEPT)):
        raise InvalidRequest(crossing)
    return job


@cache
def _contract() -> TypeAdapter[Job]:
    return TypeAdapter(Job)


def canonical(job: Job) -> bytes:
    """Write a job as it was accepted: members by their names on the wire, absent ones and defaults left out."""
    return _contract().dump_json(job, by_alias=True, exclude_none=True, exclude_unset=True)


def _faults_across_the_rest(document: object, errors: list[ErrorDetails]) -> Iterator[Fault]:
    """Check what can be checked without the members that are at fault themselves."""
    if not isinstance(document, Mapping) or any(len(error["loc"]) < 2 for error in errors):
        return  # no object, or no known task
    unread = frozenset(str(error["loc"][1]) for error in errors)  # behind the tag of the task
    rest = {name: member for name, member in document.items() if name not in unread}
    try:
        job = _contract().validate_python(rest)
    except ValidationError:
        return  # What the task cannot do without is among the faulty members: nothing more can be said.
    yield from faults_of(job, unread)


def _fault(error: ErrorDetails, document: object) -> Fault:
    kind = error["type"]
    place = place_of(Job, error["loc"], kind)
    if kind in OWN_WORDS:
        return Fault(pointer=pointer(*place.steps), code=OWN_WORDS[kind], detail=error["msg"])
    if kind in ("union_tag_invalid", "union_tag_not_found") and isinstance(_at(document, place.steps), Mapping):
        chosen_by = pointer(*place.steps, "kind" if place.steps else "task")
        if kind == "union_tag_not_found":
            return Fault(pointer=chosen_by, code="missing", detail="is required")
        return Fault(pointer=chosen_by, code="not-allowed", detail=code_and_detail(error)[1])
    code, detail = code_and_detail(error)
    if code == "unknown-field" and (meant := _nearest(str(error["loc"][-1]), place.fields)):
        detail += f"; did you mean `{meant}`?"
    return Fault(pointer=pointer(*place.steps), code=code, detail=detail)


def _nearest(name: str, fields: tuple[str, ...]) -> str | None:
    return next(iter(get_close_matches(name[:100], fields, n=1, cutoff=_NAME_LIKENESS)), None)


def _at(document: object, steps: tuple[str | int, ...]) -> object:
    for step in steps:
        document = document[step]  # type: ignore[index]  # pydantic has just walked these steps
    return document
