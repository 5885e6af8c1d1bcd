"""Whatever is done to the bytes or the members of a valid body, the answer is a success or the caller's fault."""

import json
from collections.abc import Callable
from functools import partial
from typing import Any

import pytest
from flask.testing import FlaskClient
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from service.web.application import create_app
from tests.schemas.documents import full, plain
from tests.service.fakes import FakeDocumentStore, FakeJobStore
from tests.service.web.live import SMALL

BODIES = [json.dumps(plain()).encode(), json.dumps(full("schedule")).encode(), json.dumps(full("check")).encode()]
ODD: list[Any] = [
    None, True, -1, 0, 1e308, 2**64, "", "\0", "fleet", "b1", [], {}, [[]], {"": None}, "1e999", 1e-320, "9" * 300,
    {"a": {"b": {"c": 1}}}, [None], "2027-03-14T00:00:00Z", "PT15M", "../..", "\ud7ff\ue000", ["x"] * 50,
]  # fmt: skip


def bounded(examples: int) -> settings:
    """Bound a search; what is slow on a busy machine is no fault."""
    return settings(max_examples=examples, deadline=None, derandomize=True, suppress_health_check=list(HealthCheck))


@pytest.fixture(scope="module")
def client() -> FlaskClient:
    return create_app(SMALL, FakeJobStore(), FakeDocumentStore()).test_client()


def check(client: FlaskClient, body: bytes, media: str = "application/json") -> None:
    answered = client.post("/v1/jobs/validate", data=body, content_type=media)
    assert answered.status_code in (200, 400, 413, 415, 422), (answered.status_code, body[:500])
    if answered.status_code != 200:
        assert answered.content_type == "application/problem+json"
        assert len(answered.data) < 64 * 1024


edits = st.lists(
    st.tuples(st.floats(0, 1), st.sampled_from(["put", "cut", "double", "swap"]), st.binary(min_size=1, max_size=6)),
    min_size=1,
    max_size=8,
)


@bounded(300)
@given(body=st.sampled_from(BODIES), changes=edits)
def test_changed_bytes_never_break_the_service(
    client: FlaskClient, body: bytes, changes: list[tuple[float, str, bytes]]
) -> None:
    changed = bytearray(body)
    for share, how, piece in changes:
        place = int(share * max(0, len(changed) - 1))
        if how == "put":
            changed[place:place] = piece
        elif how == "cut":
            del changed[place : place + len(piece)]
        elif how == "double":
            changed[place:place] = changed[place : place + 40]
        else:
            changed[place : place + len(piece)] = piece
    check(client, bytes(changed))


def places(value: Any) -> list[Callable[[Any], None]]:
    """List, for each member anywhere in a document, how to put another value there."""
    found: list[Callable[[Any], None]] = []
    if isinstance(value, dict | list):
        for name, inner in list(value.items() if isinstance(value, dict) else enumerate(value)):
            found.append(partial(value.__setitem__, name))
            found += places(inner)
    return found


@bounded(300)
@given(
    task=st.sampled_from(["schedule", "check", "sequence", "reschedule", "commitment_costs"]),
    changes=st.lists(st.tuples(st.integers(0, 10_000), st.sampled_from(ODD)), min_size=1, max_size=6),
)
def test_changed_members_never_break_the_service(
    client: FlaskClient, task: str, changes: list[tuple[int, Any]]
) -> None:
    document = full(task)
    for number, value in changes:
        options = places(document)
        if options:
            options[number % len(options)](json.loads(json.dumps(value)))
    check(client, json.dumps(document).encode())


@bounded(100)
@given(body=st.binary(max_size=200), media=st.text(max_size=40).filter(lambda text: text.isprintable()))
def test_any_bytes_of_any_kind_are_the_callers_fault(client: FlaskClient, body: bytes, media: str) -> None:
    check(client, body, media.encode("latin-1", "replace").decode("latin-1"))


@bounded(200)
@given(
    method=st.sampled_from(["GET", "PUT", "POST", "DELETE", "PATCH", "OPTIONS", "HEAD"]),
    path=st.lists(st.sampled_from(["v1", "jobs", "fleets", "x", "", "..", "%00", "%ff", "1", "validate"]), max_size=6),
    query=st.text(alphabet="abcdefghijklmnopqrstuvwxyz=&%0123456789+;", max_size=40),
)
def test_any_address_is_answered(client: FlaskClient, method: str, path: list[str], query: str) -> None:
    answered = client.open("/" + "/".join(path) + "?" + query, method=method, data=b"{}")
    assert answered.status_code < 500
