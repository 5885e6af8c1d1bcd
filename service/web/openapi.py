"""The OpenAPI document (3.1.1), made from the endpoints and the contract's own models."""

import re
from collections.abc import Callable, Iterable, Sequence
from functools import cache
from importlib.metadata import version
from typing import Any, Literal

from flask import Response
from pydantic import TypeAdapter

from schemas.document import Answer
from schemas.job import ScheduleAsset, ScheduleToCheck
from service.web.answers import JSON, PROBLEM, is_unchanged, json_bytes, tag_of, unchanged_answer
from service.web.operations import Call, Operation, Success
from service.web.parameters import ID_PATTERN
from service.web.problems import MEANINGS, AnyProblemType
from service.web.shapes import ProblemDocument

Json = dict[str, Any]

EVERYWHERE: tuple[AnyProblemType, ...] = (
    "bad-request",
    "not-acceptable",
    "uri-too-long",
    "headers-too-large",
    "invalid-parameters",
    "internal",
)
"""Problem types that any endpoint may answer with."""

GROUPS = {
    "fleets": "What stands on the ground, stored under a name",
    "windows": "Market windows, stored under a name",
    "jobs": "Questions, and how far their answers are",
    "answers": (
        "Schedules and diagnoses. Schedules are advisory: protection settings, the battery management system, "
        "the connection agreement and licensed, local practice prevail"
    ),
    "service": "The service about itself",
}
HEADERS: dict[str, tuple[str, Json]] = {
    "Allow": ("Methods offered at this address", {"type": "string"}),
    "ETag": ("Entity tag of the state given", {"type": "string"}),
    "Hourwright-Caution": ("What stands beside every schedule", {"type": "string"}),
    "Hourwright-Revision": ("Revision of the document given", {"type": "integer", "minimum": 1}),
    "Idempotency-Key": (
        (
            "A quoted string: a repeated submission with the same key and content is answered with the first one's "
            "job. Kept 24 h"
        ),
        {"type": "string", "maxLength": 514},
    ),
    "Idempotency-Replayed": ("An earlier submission is answered for", {"type": "string", "enum": ["true"]}),
    "If-Match": ("Write only where the stored document has one of these entity tags", {"type": "string"}),
    "If-None-Match": ("Read: only what is new; write: `*`, only where nothing is stored", {"type": "string"}),
    "Link": ("The next page", {"type": "string"}),
    "Location": ("Where it is", {"type": "string", "format": "uri-reference"}),
    "Prefer": ("`wait=N`: answer when the job has ended, after N seconds at the latest", {"type": "string"}),
    "Preference-Applied": ("The wait that was granted", {"type": "string"}),
    "Retry-After": ("Seconds after which to ask again", {"type": "integer", "minimum": 0}),
    "X-Request-Id": ("Id of the request, as in the service's log", {"type": "string"}),
}
_ONLY_NEW: Json = {"type": "string", "enum": ["*"]}
_PATH_PARAMETERS: dict[str, Json] = {
    "id": {"type": "string", "pattern": ID_PATTERN},
    "number": {"type": "integer", "minimum": 1},
    "type": {"type": "string", "enum": list(MEANINGS)},
}
Mode = Literal["validation", "serialization"]
Use = tuple[str, str]
REQUEST = "request"
PROBLEMS: Use = ("", "problem")
_TAKEN_WHOLE = (ScheduleToCheck, ScheduleAsset)
"""A whole schedule document is taken for these: what is no decision in it is passed over."""


def operation(operations: Callable[[], Sequence[Operation]]) -> Operation:
    """Make the endpoint that gives the document; `operations` is asked at its first call."""

    @cache
    def made() -> tuple[bytes, str]:
        body = json_bytes(document(operations()))
        return body, tag_of(body)

    def answer(call: Call) -> Response:
        body, tag = made()
        if is_unchanged(call.request, tag):
            return unchanged_answer(tag)
        return Response(body, 200, {"ETag": f'"{tag}"', "Vary": "Accept"}, content_type=JSON)

    summary = "Read this document"
    return Operation(
        "readOpenapi",
        "GET",
        "/openapi.json",
        "service",
        summary,
        answer,
        (
            Success(200, "The OpenAPI document", {JSON: dict[str, Any]}, ("ETag",)),
            Success(304, "The same", {}, ("ETag",)),
        ),
        ("precondition-failed",),
        headers=("If-None-Match",),
    )


def document(operations: Iterable[Operation]) -> Json:
    """Describe the endpoints."""
    found = list(operations)
    schemas, references = _schemas(found)
    paths: Json = {}
    for each in found:
        paths.setdefault(each.path, {})[each.method.lower()] = _operation(each, references)
    return {
        "openapi": "3.1.1",
        "info": {
            "title": "Hourwright",
            "version": version("hourwright"),
            "summary": "Audited schedules for fleets of flexible energy assets",
            "description": "Power in MW, positive into the grid; energy in MWh; money in the window's currency. "
            "`null` means absent. Schedules are advisory.",
            "license": {"name": "Apache-2.0", "identifier": "Apache-2.0"},
        },
        "servers": [{"url": "/"}],
        "tags": [{"name": name, "description": text} for name, text in GROUPS.items()],
        "paths": paths,
        "components": {"schemas": schemas},
    }


def _schemas(operations: Sequence[Operation]) -> tuple[Json, dict[Use, Json]]:
    """Collect the schemas of all bodies, and what stands in their places: by endpoint and by use in it."""
    uses: list[tuple[Use, Mode, TypeAdapter[Any]]] = []
    for each in operations:
        if each.body is not None:
            uses.append(((each.name, REQUEST), "validation", TypeAdapter(each.body)))
        for success in each.successes:
            for media, model in success.bodies.items():
                uses.append(((each.name, f"{success.status} {media}"), _mode(model), TypeAdapter(model)))
    uses.append((PROBLEMS, "serialization", TypeAdapter(ProblemDocument)))
    found, definitions = TypeAdapter.json_schemas(uses, ref_template="#/components/schemas/{model}")
    components: Json = {name: _nulls_allowed(schema) for name, schema in definitions["$defs"].items()}
    for model in _TAKEN_WHOLE:
        components[model.__name__].pop("additionalProperties")
    return components, {use: schema for (use, _), schema in found.items()}


def _mode(model: Any) -> Mode:
    """Describe what we make as it is written, and the callers' own documents as they are read."""
    return "serialization" if isinstance(model, type) and issubclass(model, Answer) else "validation"


def _nulls_allowed(schema: Json) -> Json:
    """Allow null for the optional members of what callers send: on this wire it means absent."""
    if schema.get("additionalProperties") is not False:
        return schema
    required = set(schema.get("required", ()))
    for name, member in schema["properties"].items():
        _close_keyed(member)
        if name not in required:
            schema["properties"][name] = _or_null(member)
    return schema


def _close_keyed(schema: Any) -> None:
    """Where members are keyed by id: refuse names that are none, and allow null for each."""
    if isinstance(schema, list):
        for each in schema:
            _close_keyed(each)
    elif isinstance(schema, dict):
        for each in list(schema.values()):
            _close_keyed(each)
        if "patternProperties" in schema:
            keyed = schema["patternProperties"]
            schema["patternProperties"] = {pattern: _or_null(inner) for pattern, inner in keyed.items()}
            schema["additionalProperties"] = False


def _or_null(schema: Json) -> Json:
    if {"type": "null"} in schema.get("anyOf", ()):
        return schema
    names = ("default", "description", "title")
    beside: Json = {name: member for name, member in schema.items() if name in names}
    inner: Json = {name: member for name, member in schema.items() if name not in names}
    return {"anyOf": [inner, {"type": "null"}]} | beside


def _operation(each: Operation, references: dict[Use, Json]) -> Json:
    described: Json = {
        "operationId": each.name,
        "tags": [each.group],
        "summary": each.summary,
        "description": f"{each.summary}.",
        "parameters": _parameters(each),
        "responses": _responses(each, references),
    }
    if each.body is not None:
        schema = references[each.name, REQUEST]
        described["requestBody"] = {"required": not each.body_optional, "content": {JSON: {"schema": schema}}}
    return described


def _parameters(each: Operation) -> list[Json]:
    path = [
        {"name": name, "in": "path", "required": True, "description": name, "schema": _PATH_PARAMETERS[name]}
        for name in re.findall(r"{(\w+)}", each.path)
    ]
    query = [
        {"name": one.name, "in": "query", "description": one.description, "schema": dict(one.schema)}
        for one in each.query
    ]
    headers = [
        {
            "name": name,
            "in": "header",
            "description": HEADERS[name][0],
            "schema": _ONLY_NEW if (each.method, name) == ("PUT", "If-None-Match") else HEADERS[name][1],
        }
        for name in each.headers
    ]
    return [*path, *query, *headers]


def _responses(each: Operation, references: dict[Use, Json]) -> Json:
    responses: Json = {}
    for success in each.successes:
        content = {media: {"schema": references[each.name, f"{success.status} {media}"]} for media in success.bodies}
        described = {"description": success.description, "headers": _headers(success.headers)}
        responses[str(success.status)] = described | ({"content": content} if content else {})
    by_status: dict[int, list[AnyProblemType]] = {}
    for kind in (*each.problems, *EVERYWHERE):
        by_status.setdefault(MEANINGS[kind].status, []).append(kind)
    for status, kinds in sorted(by_status.items()):
        described = {
            "description": "; ".join(f"`{kind}`: {MEANINGS[kind].title}" for kind in sorted(set(kinds))),
            "headers": _headers(("Retry-After",) if status == 503 else ()),
        }
        content = responses.get(str(status), {}).get("content", {})
        described["content"] = content | {PROBLEM: {"schema": references[PROBLEMS]}}
        responses[str(status)] = described
    return dict(sorted(responses.items()))


def _headers(names: Iterable[str]) -> Json:
    return {name: {"description": HEADERS[name][0], "schema": HEADERS[name][1]} for name in (*names, "X-Request-Id")}
