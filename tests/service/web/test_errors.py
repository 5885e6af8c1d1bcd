"""Whatever goes wrong is told as a problem document, with what the caller needs and nothing of ours."""

import json
import logging

import pytest

from service.web.problems import MEANINGS
from tests.schemas.documents import plain
from tests.service.web.live import SMALL, House, served

ROUTES = [
    ("/v1/fleets", {"GET", "HEAD", "OPTIONS"}),
    ("/v1/fleets/x", {"DELETE", "GET", "HEAD", "OPTIONS", "PUT"}),
    ("/v1/windows/x/revisions", {"GET", "HEAD", "OPTIONS"}),
    ("/v1/windows/x/revisions/1", {"GET", "HEAD", "OPTIONS"}),
    ("/v1/jobs", {"GET", "HEAD", "OPTIONS", "POST"}),
    ("/v1/jobs/validate", {"OPTIONS", "POST"}),
    ("/v1/jobs/x", {"DELETE", "GET", "HEAD", "OPTIONS"}),
    ("/v1/jobs/x/cancel", {"OPTIONS", "POST"}),
    ("/v1/jobs/x/request", {"GET", "HEAD", "OPTIONS"}),
    ("/v1/jobs/x/schedule", {"GET", "HEAD", "OPTIONS"}),
    ("/v1/jobs/x/diagnosis", {"GET", "HEAD", "OPTIONS"}),
    ("/v1/version", {"GET", "HEAD", "OPTIONS"}),
    ("/health/live", {"GET", "HEAD", "OPTIONS"}),
    ("/health/ready", {"GET", "HEAD", "OPTIONS"}),
    ("/openapi.json", {"GET", "HEAD", "OPTIONS"}),
    ("/problems/busy", {"GET", "HEAD", "OPTIONS"}),
]


def methods(header: str) -> set[str]:
    return {name.strip() for name in header.split(",")}


@pytest.mark.parametrize(("path", "allowed"), ROUTES)
@pytest.mark.parametrize("method", ["TRACE", "PATCH", "CONNECT", "BREW", "PUT", "POST", "DELETE"])
def test_a_method_that_is_not_offered_is_405_with_those_that_are(
    house: House, path: str, allowed: set[str], method: str
) -> None:
    if method in allowed:
        return
    answered = house.call(method, path)
    assert (answered.status, answered.problem) == (405, "method-not-allowed")
    assert methods(answered.headers["allow"]) == allowed


@pytest.mark.parametrize(("path", "allowed"), ROUTES)
def test_options_lists_the_methods(house: House, path: str, allowed: set[str]) -> None:
    answered = house.call("OPTIONS", path)
    assert (answered.status, answered.body) == (204, b"")
    assert methods(answered.headers["allow"]) == allowed


@pytest.mark.parametrize(
    "path",
    [
        "/", "/v1", "/v1/", "/v1/jobs/", "/v1//jobs", "/V1/jobs", "/v1/jobs/x/changes", "/v1/jobs/x/report",
        "/v1/jobs/x/events", "/v1/deliveries", "/docs", "/metrics", "/problems/nothing", "/problems/%00", "/%ff", "/%",
        "/openapi.yaml", "/v1/fleets/x/", "/v1/fleets/a%2Fb", "/static/x", "/v1/jobs/../version", "*",
    ],
)  # fmt: skip
def test_an_unknown_address_is_404(house: House, path: str) -> None:
    answered = house.call("GET", path)
    assert (answered.status, answered.problem) == (404, "not-found")


@pytest.mark.parametrize("kind", MEANINGS)
def test_every_problem_type_has_a_page(house: House, kind: str) -> None:
    answered = house.call("GET", f"/problems/{kind}")
    assert answered.status == 200
    page = answered.document
    assert (page["type"], page["status"]) == (f"/problems/{kind}", MEANINGS[kind].status)  # type: ignore[index]
    assert page["title"]
    assert page["advice"]


@pytest.mark.parametrize(
    ("head", "status"),
    [
        (b"GET /health/live HTTP/1.1\r\n", 400),
        (b"GET /health/live HTTP/1.1\r\nHost: \r\n", 400),
        (b"GET /health/live HTTP/1.1\r\nHost: a b\r\n", 400),
        (b"GET /health/live HTTP/1.1\r\nHost: a@b\r\n", 400),
        (b"GET /health/live HTTP/1.1\r\nHost: a/../b\r\n", 400),
        (b"GET /health/live HTTP/1.1\r\nHost: a\r\nHost: b\r\n", 400),
        (b"GET /health/live HTTP/1.1\r\nHost: \xff\r\n", 400),
        (b"GET /health/live HTTP/1.1\r\nHost: xn--0.\xc3\xa9\r\n", 400),
        (b"GET /health/live HTTP/1.1\r\nHost: " + b"a" * 300 + b"\r\n", 400),
        (b"GET /health/live HTTP/1.1\r\nHost: a..b\r\n", 400),
        (b"GET /health/live HTTP/1.1\r\nHost: localhost:8080\r\n", 200),
        (b"GET /health/live HTTP/1.1\r\nHost: [::1]:8080\r\n", 200),
        (b"GET /health/live HTTP/1.0\r\n", 200),
        (b"GET  /health/live HTTP/1.1\r\nHost: h\r\n", 400),
        (b"GET /health/live\r\n", 200),
        (b"GET /health/live HTTP/9.9\r\nHost: h\r\n", 200),
        (b"GET /health/live HTTP/one\r\nHost: h\r\n", 400),
        (b"\xff\xfe /health/live HTTP/1.1\r\nHost: h\r\n", 400),
        (b"GET http://h/health/live HTTP/1.1\r\nHost: h\r\n", 200),
        (b"GET http://[/health/live HTTP/1.1\r\nHost: h\r\n", 400),
        (b"GET /health/live?" + b"a" * 9000 + b" HTTP/1.1\r\nHost: h\r\n", 414),
        (b"GET /" + b"a" * 9000 + b" HTTP/1.1\r\nHost: h\r\n", 414),
        (b"GET /health/live HTTP/1.1\r\nHost: h\r\nA: " + b"a" * 17_000 + b"\r\n", 431),
        (b"GET /health/live HTTP/1.1\r\nHost: h\r\nA: " + b"a" * 70_000 + b"\r\n", 431),
        (b"GET /health/live HTTP/1.1\r\nHost: h\r\nContent-Length: abc\r\n", 400),
        (b"GET /health/live HTTP/1.1\r\nHost: h\r\nContent-Length: 2\r\nContent-Type: text/x\r\n\r\n{}", 200),
        (b"GET /health/live HTTP/1.1\r\nHost: h\r\nCookie: \xff=\xfe; ;;=\r\n", 200),
        (b"GET /health/live HTTP/1.1\r\nHost: h\r\nAccept: \xff, ;;q=,/\r\n", 406),
        (b"GET /v1/jobs HTTP/1.1\r\nHost: h\r\nIf-None-Match: \xff, W/, \"\r\n", 200),
        (b"GET /v1/jobs HTTP/1.1\r\nHost: h\r\nPrefer: \xff, wait=, wait=-1\r\n", 200),
        (b"GET /v1/jobs HTTP/1.1\r\nHost: h\r\nRange: bytes=0-1\r\nIf-Range: x\r\n", 200),
        (b"GET /v1/jobs HTTP/1.1\r\nHost: h\r\nIf-Modified-Since: never\r\n", 200),
        (b"GET /v1/jobs?%ff=%fe HTTP/1.1\r\nHost: h\r\n", 422),
        (b"GET /v1/jobs?label=%ff%00 HTTP/1.1\r\nHost: h\r\n", 200),
        (b"GET /v1/jobs?" + b"a=1&" * 1500 + b" HTTP/1.1\r\nHost: h\r\n", 422),
        (b"GET /v1/jobs?cursor=" + b"%F0%9F" * 80 + b" HTTP/1.1\r\nHost: h\r\n", 400),
    ],
)  # fmt: skip
def test_a_request_line_or_header_has_its_exact_answer(house: House, head: bytes, status: int) -> None:
    answered = house.say(head + b"\r\n", method="GET")
    assert answered is not None
    assert answered.status == status, answered
    if status >= 400:
        assert answered.problem
    assert house.call("GET", "/health/live").status == 200


def test_only_hosts_that_are_named_are_served_where_any_are() -> None:
    settings = type(SMALL)(**{**SMALL.__dict__, "allowed_hosts": ("planner.example", "[::1]")})
    with served(settings) as house:
        for host, status in (("planner.example:80", 200), ("PLANNER.example", 200), ("[::1]", 200), ("other", 400)):
            answered = house.say(f"GET /health/live HTTP/1.1\r\nHost: {host}\r\n\r\n".encode(), method="GET")
            assert answered is not None
            assert answered.status == status


@pytest.mark.parametrize("given", ["abc.DEF_1-2", "x" * 128])
def test_a_request_id_is_taken_over(house: House, given: str) -> None:
    answered = house.call("GET", "/nowhere", x_request_id=given)
    assert answered.headers["x-request-id"] == given
    assert answered.document["instance"] == f"urn:hourwright:request:{given}"


@pytest.mark.parametrize("given", ["", "x" * 129, "a b", "a\tb", "é", '"a"', "a,b"])
def test_a_request_id_that_is_not_fit_is_replaced(house: House, given: str) -> None:
    first = house.call("GET", "/health/live", x_request_id=given).headers["x-request-id"]
    second = house.call("GET", "/health/live", x_request_id=given).headers["x-request-id"]
    assert given not in (first, second)
    assert first != second


@pytest.mark.parametrize("path", ["/health/live", "/v1/jobs", "/openapi.json", "/nowhere", "/v1/fleets/x"])
def test_every_answer_carries_what_keeps_it_safe(house: House, path: str) -> None:
    headers = house.call("GET", path).headers
    assert headers["x-content-type-options"] == "nosniff"
    assert headers["cache-control"] == "no-store"
    assert "server" not in headers
    assert "via" not in headers
    assert headers["date"]


@pytest.mark.parametrize("path", ["/v1/jobs", "/v1/fleets", "/v1/version", "/openapi.json", "/health/live"])
def test_json_endpoints_offer_json_only(house: House, path: str) -> None:
    answered = house.call("GET", path, accept="text/csv")
    assert (answered.status, answered.problem) == (406, "not-acceptable")
    assert answered.document["offers"] == ["application/json"]


def test_nothing_is_done_for_a_caller_who_could_not_read_the_answer(house: House) -> None:
    before = house.call("GET", "/v1/jobs").document
    assert house.call("POST", "/v1/jobs", plain(), accept="text/html").status == 406
    assert house.call("GET", "/v1/jobs").document == before


def test_an_unreachable_store_is_503_but_for_liveness(house: House) -> None:
    house.outage.begin()
    try:
        for method, path, body in [
            ("POST", "/v1/jobs", plain()),
            ("GET", "/v1/jobs", None),
            ("GET", "/v1/jobs/x", None),
            ("DELETE", "/v1/jobs/x", None),
            ("GET", "/v1/jobs/x/schedule", None),
            ("PUT", "/v1/fleets/x", plain()["fleet"]),
            ("GET", "/v1/windows/x", None),
            ("POST", "/v1/jobs/validate", {"fleet_id": "x", "window_id": "y"}),
        ]:
            answered = house.call(method, path, body)
            assert (answered.status, answered.problem) == (503, "store-unreachable")
            assert int(answered.headers["retry-after"]) > 0
        assert house.call("GET", "/health/live").status == 200
        ready = house.call("GET", "/health/ready")
        assert (ready.status, ready.document["status"]) == (503, "fail")
        assert int(ready.headers["retry-after"]) > 0
        assert house.call("POST", "/v1/jobs/validate", plain()).status == 200
    finally:
        house.outage.lift()
    assert house.call("GET", "/health/ready").document["status"] == "pass"


def test_without_workers_or_keeper_readiness_warns(house: House) -> None:
    seen = house.jobs.seen
    house.jobs.seen = type(seen)("7.4", keeper_seen=False)
    answered = house.call("GET", "/health/ready")
    house.jobs.seen = seen
    assert (answered.status, answered.document["status"]) == (200, "warn")
    assert len(answered.document["warnings"]) == 2


def test_a_defect_of_ours_shows_as_an_id_and_one_log_line(
    house: House, caplog: pytest.LogCaptureFixture, monkeypatch: pytest.MonkeyPatch
) -> None:
    def broken(_job_id: str) -> None:
        raise KeyError("secret-of-the-house")

    monkeypatch.setattr(house.jobs, "job", broken)
    with caplog.at_level(logging.ERROR, "hourwright.faults"):
        answered = house.call("GET", "/v1/jobs/x", x_request_id="the-broken-one")
    assert (answered.status, answered.problem) == (500, "internal")
    assert b"secret" not in answered.body
    assert b"Traceback" not in answered.body
    (record,) = caplog.records
    assert record.fields == {"request_id": "the-broken-one"}  # type: ignore[attr-defined]
    assert record.exc_info is not None
    assert house.call("GET", "/health/live").status == 200


def test_many_faults_are_cut_and_said_to_be(house: House) -> None:
    faulty = plain() | {"initial": {f"x{number}": {"stored_mwh": -1} for number in range(10_000)}}
    answered = house.call("POST", "/v1/jobs", faulty)
    assert answered.status == 422
    assert len(answered.document["errors"]) == 100
    assert answered.document["errors_truncated"] is True
    assert len(answered.body) < 64 * 1024


def test_version_says_what_answers(house: House) -> None:
    found = house.call("GET", "/v1/version").document
    assert found["name"] == "hourwright"
    assert found["contract"] in [entry["version"] for entry in found["contract_versions"]]
    assert set(found["libraries"]) >= {"python", "tzdata"}
    assert json.dumps(found)
