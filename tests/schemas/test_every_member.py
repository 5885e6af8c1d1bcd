"""Each member of the contract, spoiled in each way its JSON schema knows, is refused at its own place."""

import copy
from collections.abc import Iterator
from functools import cache
from typing import Any, NamedTuple

import pytest
from pydantic import TypeAdapter

from schemas.job import Job
from schemas.reading import read_job
from tests.schemas.documents import ABSENT, TASKS, Json, at, full, steps_of, with_put
from tests.schemas.refusals import faults_of

SCHEMA: Json = TypeAdapter[Job](Job).json_schema()
WRONG_TYPES: dict[str, tuple[Any, ...]] = {
    "number": ("1.0", True, [], {}),
    "integer": ("1", 1.0, True, []),
    "string": (7, True, [], {}),
    "boolean": (1, "true", []),
    "array": ({}, "x", 7, True),
    "object": ([], "x", 7, True),
}


class Node(NamedTuple):
    """A member of a document, its schema (whole, and the branch it takes), and whether its holder needs it."""

    pointer: str
    whole: Json
    schema: Json
    value: Any
    is_required: bool


class Spoiled(NamedTuple):
    """A way to spoil a document, and the place a fault must name."""

    task: str
    pointer: str
    value: Any
    named: str


def resolved(schema: Json) -> Json:
    while "$ref" in schema:
        schema = SCHEMA["$defs"][schema["$ref"].rpartition("/")[2]]
    return schema


def branch(schema: Json, value: Any) -> Json:
    """Choose the branch of a union that a valid value is of."""
    schema = resolved(schema)
    options = [resolved(option) for option in (schema.get("anyOf") or schema.get("oneOf") or [])]
    if not options:
        return schema
    fitting = [branch(option, value) for option in options if option.get("type") != "null" and takes(option, value)]
    assert len(fitting) == 1, (schema, value)
    return fitting[0]


def takes(schema: Json, value: Any) -> bool:
    """Claim that a value is of the type, and the kind or task, of a schema; its members are not looked at."""
    if "anyOf" in schema or "oneOf" in schema:
        options = [resolved(option) for option in (schema.get("anyOf") or schema.get("oneOf") or [])]
        return any(takes(option, value) for option in options)
    kinds = {bool: "boolean", int: "integer", float: "number", str: "string", list: "array", dict: "object"}
    kind = kinds[type(value)]
    if kind == "array" and not value:
        return False
    if schema["type"] != kind and not (kind == "integer" and schema["type"] == "number"):
        return False
    constants = {name: resolved(member).get("const") for name, member in schema.get("properties", {}).items()}
    return all(value.get(name) == word for name, word in constants.items() if isinstance(word, str))


def nodes(schema: Json, value: Any, pointer: str = "", is_required: bool = True) -> Iterator[Node]:
    whole, schema = resolved(schema), branch(schema, value)
    yield Node(pointer, whole, schema, value, is_required)
    if isinstance(value, dict):
        by_key = [*schema.get("patternProperties", {}).values(), schema.get("additionalProperties")]
        for name, member in value.items():
            inner = schema.get("properties", {}).get(name) or by_key[0]
            if isinstance(inner, dict):
                yield from nodes(inner, member, f"{pointer}/{name}", name in schema.get("required", ()))
    elif isinstance(value, list):
        for position, entry in enumerate(value if isinstance(value[0], dict) else value[:2]):
            yield from nodes(schema["items"], entry, f"{pointer}/{position}", is_required=True)


@cache
def nodes_of(task: str) -> list[Node]:
    """List the members of the full request for a task, but those that `schedule` has too.

    What a schedule document holds beside decisions is no part of what `check` reads.
    """
    document = full(task)
    if task == "check":
        del document["schedule"]["margin"]
        for entry in document["schedule"]["assets"]:
            entry.pop("stored_mwh", None)
            entry.pop("totals", None)
    found = list(nodes(SCHEMA, document))
    if task == "schedule":
        return found
    shared = {node.pointer for node in nodes_of("schedule")}
    return [node for node in found if node.pointer not in shared or not node.pointer]


def bad_values(node: Node) -> Iterator[tuple[Any, str]]:
    """Values the schema refuses, each with the place that is to be named: the member, or its first entry."""
    schema, pointer = node.schema, node.pointer
    for wrong in WRONG_TYPES[schema["type"]]:
        if not takes(node.whole, wrong):
            yield wrong, pointer
    yield from ((value, pointer) for value in beyond_the_range(schema))
    if "pattern" in schema:
        yield "!", pointer
        yield "", pointer
    if "maxLength" in schema:
        yield "x" * (schema["maxLength"] + 1), pointer
    if "enum" in schema or ("const" in schema and schema["type"] == "string"):
        yield "no-such-word", pointer
    if schema.get("const") is True:
        yield False, pointer
    if schema.get("format") == "date-time":
        yield from ((text, pointer) for text in ("2027-03-14T00:00:00", "2027-03-14", "2027-02-30T00:00:00Z", "0"))
    if "maxItems" in schema:
        yield [node.value[0]] * (schema["maxItems"] + 1), pointer
    if schema.get("minItems"):
        yield [], pointer


def beyond_the_range(schema: Json) -> Iterator[float]:
    step = 1 if schema["type"] == "integer" else 1e-7
    if "minimum" in schema:
        yield schema["minimum"] - step
    if "exclusiveMinimum" in schema:
        yield schema["exclusiveMinimum"]
    if "maximum" in schema:
        yield schema["maximum"] + (step if schema["maximum"] < 1e6 else 1)
    if "exclusiveMaximum" in schema:
        yield schema["exclusiveMaximum"]


def spoiled(task: str) -> Iterator[Spoiled]:
    for node in nodes_of(task):
        if node.pointer in ("/task", ""):
            continue
        for wrong, named in bad_values(node):
            yield Spoiled(task, node.pointer, wrong, named)
        if node.schema["type"] == "object" and "properties" in node.schema:
            yield Spoiled(task, f"{node.pointer}/no_such_member", 1, f"{node.pointer}/no_such_member")
        if node.is_required and not node.pointer.rpartition("/")[2].isdigit():
            yield Spoiled(task, node.pointer, ABSENT, node.pointer)
            yield Spoiled(task, node.pointer, None, node.pointer)
        if node.pointer.rpartition("/")[2].isdigit():
            yield Spoiled(task, node.pointer, None, node.pointer)


def lies_in(document: Any, pointer: str) -> bool:
    try:
        at(document, pointer)
    except (KeyError, IndexError, TypeError, ValueError):
        return False
    return True


@pytest.mark.parametrize("task", TASKS)
def test_a_spoiled_member_is_refused_at_its_place(task: str) -> None:
    count = 0
    unnamed, dangling = [], []
    for case in spoiled(task):
        document = with_put(full(task), case.pointer, case.value)
        faults = faults_of(document)
        if case.named not in {fault.pointer for fault in faults}:
            unnamed.append((case.pointer, str(case.value)[:40], [fault.pointer for fault in faults[:3]]))
        dangling += [fault for fault in faults if fault.code != "missing" and not lies_in(document, fault.pointer)]
        count += 1
    assert (unnamed, dangling) == ([], [])
    assert count > (1_500 if task == "schedule" else 15)


@pytest.mark.parametrize("task", TASKS)
def test_null_means_absent(task: str) -> None:
    for node in nodes_of(task):
        if node.is_required or not node.pointer:
            continue
        with_null = with_put(full(task), node.pointer, None)
        without = with_put(full(task), node.pointer, ABSENT)
        if faults := faults_of(without):
            assert faults_of(with_null) == faults, node.pointer
        else:
            assert read_job(with_null) == read_job(without), node.pointer


@pytest.mark.parametrize("task", TASKS)
def test_reading_changes_nothing_in_the_document(task: str) -> None:
    document = with_put(full(task), "/label", None)
    before = copy.deepcopy(document)
    read_job(document)
    assert document == before


def test_the_full_requests_hold_every_member_of_the_contract() -> None:
    seen: dict[int, set[str]] = {}
    for task in TASKS:
        for node in nodes_of(task):
            if node.schema["type"] == "object" and "properties" in node.schema:
                seen.setdefault(id(node.schema), set()).update(node.value)
    parts = {name: part for name, part in SCHEMA["$defs"].items() if "properties" in part}
    lacking = {name: set(part["properties"]) - seen.get(id(part), set()) for name, part in parts.items()}
    alternatives = {"fleet", "fleet_id", "window", "window_id"}  # no request gives both of a pair
    allowed = {name: alternatives for name in parts if name.endswith("Job")}
    assert {name: names for name, names in lacking.items() if names - allowed.get(name, set())} == {}


def test_steps_and_pointers_agree() -> None:
    assert steps_of("/a~1b/m~0n/0") == ["a/b", "m~n", "0"]
    assert at({"a/b": {"m~n": [7]}}, "/a~1b/m~0n/0") == 7
