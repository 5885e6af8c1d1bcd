"""The OpenAPI document is valid, lists exactly what is served, and its schemas agree with what is read and written."""

import json
import re
from collections.abc import Iterator
from typing import Any

import pytest
from jsonschema import Draft202012Validator
from openapi_spec_validator import validate

from schemas.document import Document
from service.web.operations import Operation
from tests.schemas.documents import TASKS, full, plain
from tests.service.web.answers import diagnosis_document, job, schedule_document, undecided_document
from tests.service.web.live import House

Json = dict[str, Any]


@pytest.fixture(scope="module")
def described(house: House) -> Json:
    found: Json = house.call("GET", "/openapi.json").document
    return found


def schema(described: Json, *steps: str) -> Draft202012Validator:
    """Give a validator of the schema at a place of the document."""
    found: Any = described
    for step in steps:
        found = found[step]
    return Draft202012Validator({**found, "components": described["components"]})


def answer_schema(described: Json, path: str, method: str, status: int, media: str) -> Draft202012Validator:
    return schema(described, "paths", path, method, "responses", str(status), "content", media, "schema")


def test_the_document_is_valid_openapi(described: Json) -> None:
    assert described["openapi"] == "3.1.1"
    validate(described)


def test_the_document_lists_exactly_what_is_served(house: House, described: Json) -> None:
    listed = {(path, method.upper()) for path, operations in described["paths"].items() for method in operations}
    served = {
        (re.sub(r"<(?:\w+:)?(\w+)>", r"{\1}", rule.rule), method)
        for rule in house.app.url_map.iter_rules()
        for method in rule.methods or ()
        if method not in ("HEAD", "OPTIONS")
    }
    assert listed == served
    assert len({operation.name for operation in house.app.operations}) == len(house.app.operations)


def test_every_endpoint_says_how_it_fails_in_problem_documents(described: Json) -> None:
    for path, operations in described["paths"].items():
        for operation in operations.values():
            if path == "/health/ready":
                assert operation["responses"].pop("503")  # which is its answer, and no error
            failures = {status: each for status, each in operation["responses"].items() if status >= "400"}
            assert {"400", "406", "414", "422", "431", "500"} <= set(failures)
            assert all("application/problem+json" in each["content"] for each in failures.values())


@pytest.mark.parametrize("task", TASKS)
def test_a_full_request_of_each_task_agrees_with_its_schema(described: Json, task: str) -> None:
    request = schema(described, "paths", "/v1/jobs", "post", "requestBody", "content", "application/json", "schema")
    assert [fault.message for fault in request.iter_errors(full(task))] == []


def models(model: type[Document] = Document) -> Iterator[type[Document]]:
    """Find every model of what callers send."""
    for inner in model.__subclasses__():
        yield inner
        yield from models(inner)


def test_null_is_allowed_exactly_where_a_member_is_optional(described: Json) -> None:
    tried = 0
    components = described["components"]["schemas"]
    for model in models():
        members = components.get(model.__name__, {}).get("properties", {})
        for name, field in model.model_fields.items() if members else ():
            validator = Draft202012Validator({**members[field.alias or name], "components": described["components"]})
            assert validator.is_valid(None) != field.is_required(), (model, name)
            tried += 1
    assert tried > 150


def test_an_unknown_member_disagrees_with_the_schema(described: Json) -> None:
    request = schema(described, "paths", "/v1/jobs", "post", "requestBody", "content", "application/json", "schema")
    assert not request.is_valid(plain() | {"charge": 1})
    assert not request.is_valid(plain() | {"initial": {"not an id": {"stored_mwh": 1.0}}})
    assert request.is_valid(plain())


def test_answers_agree_with_their_schemas(house: House, described: Json) -> None:
    finished, infeasible, undecided = (house.submit(job()) for _ in range(3))
    house.jobs.finish(finished, schedule_document())
    house.jobs.finish(infeasible, diagnosis_document(), "infeasible", "diagnosis")
    house.jobs.finish(undecided, undecided_document(), "undecided", "undecided")
    house.call("PUT", "/v1/fleets/described", plain()["fleet"])
    house.call("PUT", "/v1/windows/described", plain()["window"])
    one = "/v1/jobs/{id}"
    for path, filled in [
        ("/v1/jobs", "/v1/jobs"),
        (one, f"/v1/jobs/{finished}"),
        (f"{one}/request", f"/v1/jobs/{finished}/request"),
        (f"{one}/schedule", f"/v1/jobs/{finished}/schedule"),
        (f"{one}/diagnosis", f"/v1/jobs/{infeasible}/diagnosis"),
        (f"{one}/diagnosis", f"/v1/jobs/{undecided}/diagnosis"),
        ("/v1/fleets", "/v1/fleets"),
        ("/v1/fleets/{id}", "/v1/fleets/described"),
        ("/v1/windows/{id}", "/v1/windows/described"),
        ("/v1/fleets/{id}/revisions", "/v1/fleets/described/revisions"),
        ("/v1/fleets/{id}/revisions/{number}", "/v1/fleets/described/revisions/1"),
        ("/v1/version", "/v1/version"),
        ("/health/live", "/health/live"),
        ("/health/ready", "/health/ready"),
        ("/problems/{type}", "/problems/busy"),
    ]:
        answered = house.call("GET", filled)
        assert answered.status == 200, (filled, answered)
        faults = answer_schema(described, path, "get", 200, "application/json").iter_errors(answered.document)
        assert [fault.message for fault in faults] == [], filled
    for path, body, status, media in [
        ("/v1/jobs", plain(), 202, "application/json"),
        ("/v1/jobs", {}, 422, "application/problem+json"),
        ("/v1/jobs/validate", plain(), 200, "application/json"),
    ]:
        answered = house.call("POST", path, body)
        assert answered.status == status
        assert answer_schema(described, path, "post", status, media).is_valid(answered.document)


def test_every_status_an_operation_names_has_a_problem_type_or_a_success(house: House) -> None:
    operation: Operation
    for operation in house.app.operations:
        assert operation.successes
        assert operation.summary
        if operation.body is not None:
            assert {"malformed-json", "body-too-large", "unsupported-media-type"} <= set(operation.problems)


def test_the_document_is_tagged_and_never_the_same_bytes_twice_over_the_wire(house: House) -> None:
    first = house.call("GET", "/openapi.json")
    assert house.call("GET", "/openapi.json", if_none_match=first.headers["etag"]).status == 304
    assert json.loads(first.body) == house.call("GET", "/openapi.json").document
