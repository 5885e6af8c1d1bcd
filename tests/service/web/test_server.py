"""The server: slow, silent and half-gone callers, refusals that arrive, and an end that drops nothing."""

import http.client
import json
import signal
import socket
import subprocess
import sys
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import ExitStack, closing, contextmanager
from pathlib import Path
from typing import Any

import pytest

from tests.schemas.documents import plain
from tests.service.web.live import PATIENCE_SECONDS, SMALL, House, listen

ROOT = Path(__file__).resolve().parents[3]


@contextmanager
def process() -> Iterator[tuple["subprocess.Popen[str]", int]]:
    """Run a server as a process of its own, and give it with its port."""
    command = [sys.executable, "-m", "tests.service.web.serve_fakes"]
    with subprocess.Popen(command, cwd=ROOT, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as child:
        try:
            assert child.stdout is not None
            yield child, int(child.stdout.readline())
        finally:
            child.kill()


def connected(port: int) -> socket.socket:
    return socket.create_connection(("127.0.0.1", port), PATIENCE_SECONDS)


@pytest.mark.parametrize(
    "begun",
    [
        b"",
        b"GET /health/live HT",
        b"POST /v1/jobs HTTP/1.1\r\nHost: h\r\nContent-Type: application/json\r\nContent-Length: 100\r\n\r\n{",
        b"POST /v1/jobs HTTP/1.1\r\nHost: h\r\nTransfer-Encoding: chunked\r\n\r\n5\r\nab",
    ],
    ids=["silent", "half a header", "half a body", "half a chunk"],
)
def test_callers_who_never_finish_hold_up_nobody(house: House, begun: bytes) -> None:
    with ExitStack() as held:
        for _ in range(60):
            line = held.enter_context(closing(connected(house.port)))
            line.sendall(begun)
        assert house.call("GET", "/health/live").status == 200
        assert house.call("POST", "/v1/jobs/validate", plain()).status == 200


def test_a_body_that_trickles_in_is_read(house: House) -> None:
    body = json.dumps(plain()).encode()
    head = (
        f"POST /v1/jobs/validate HTTP/1.1\r\nHost: h\r\nContent-Type: application/json\r\nContent-Length: {len(body)}"
    )
    with closing(connected(house.port)) as line:
        line.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        message = head.encode() + b"\r\n\r\n" + body
        for place in range(0, len(message), 16):
            line.sendall(message[place : place + 16])
        answered = listen(line)
    assert answered is not None
    assert answered.status == 200


def test_a_caller_who_asks_first_is_told_to_go_on_or_not(house: House) -> None:
    head = b"POST /v1/jobs/validate HTTP/1.1\r\nHost: h\r\nContent-Type: application/json\r\nExpect: 100-continue\r\n"
    body = json.dumps(plain()).encode()
    with closing(connected(house.port)) as line:
        line.sendall(head + b"Content-Length: %d\r\n\r\n" % len(body))
        assert line.recv(100) == b"HTTP/1.1 100 Continue\r\n\r\n"
        line.sendall(body)
        answered = listen(line)
    assert answered is not None
    assert answered.status == 200
    with closing(connected(house.port)) as line:
        line.sendall(head + b"Content-Length: 99999999999\r\n\r\n")
        refused = listen(line)
    assert refused is not None
    assert (refused.status, refused.problem) == (413, "body-too-large")


def test_a_refusal_arrives_although_the_caller_goes_on_sending(house: House) -> None:
    size = 40 * SMALL.max_body_bytes
    head = f"POST /v1/jobs HTTP/1.1\r\nHost: h\r\nContent-Type: application/json\r\nContent-Length: {size}\r\n\r\n"
    with closing(connected(house.port)) as line:
        line.sendall(head.encode())
        for _ in range(40):
            line.sendall(b" " * SMALL.max_body_bytes)
        answered = listen(line)
    assert answered is not None
    assert (answered.status, answered.problem) == (413, "body-too-large")


def test_requests_on_one_connection_are_answered_in_their_order(house: House) -> None:
    first = b"GET /v1/version HTTP/1.1\r\nHost: h\r\n\r\n"
    second = b"GET /nowhere HTTP/1.1\r\nHost: h\r\nConnection: close\r\n\r\n"
    with closing(connected(house.port)) as line:
        line.sendall(first + second)
        received = b"".join(iter(lambda: line.recv(65_536), b""))
    assert received.count(b"HTTP/1.1 ") == 2
    assert received.index(b"200 OK") < received.index(b"404 NOT FOUND")


def test_a_connection_is_kept_after_an_error_of_the_application(house: House) -> None:
    with closing(http.client.HTTPConnection("127.0.0.1", house.port, timeout=PATIENCE_SECONDS)) as connection:
        for path, status in [("/nowhere", 404), ("/health/live", 200)]:
            connection.request("GET", path)
            response = connection.getresponse()
            response.read()
            assert response.status == status
            assert not response.will_close


def test_many_callers_at_once_are_all_answered(house: House) -> None:
    def submit(number: int) -> int:
        return house.call("POST", "/v1/jobs", plain() | {"seed": number}).status

    with ThreadPoolExecutor(40) as callers:
        assert set(callers.map(submit, range(120))) == {202}


def test_an_end_by_signal_answers_what_has_begun_and_takes_nothing_new() -> None:
    with process() as (child, port), closing(connected(port)) as waiting, closing(connected(port)) as half:
        body = json.dumps(plain()).encode()
        head = b"POST /v1/jobs HTTP/1.1\r\nHost: h\r\nContent-Type: application/json\r\nContent-Length: %d\r\n" % len(
            body
        )
        waiting.sendall(head + b"Prefer: wait=30\r\n\r\n" + body)
        half.sendall(head + b"\r\n" + body[:-5])
        with closing(http.client.HTTPConnection("127.0.0.1", port, timeout=PATIENCE_SECONDS)) as other:
            jobs: list[Any] = []
            while not jobs:  # until the waiting one is in the store
                other.request("GET", "/v1/jobs")
                jobs = json.loads(other.getresponse().read())["jobs"]
        child.send_signal(signal.SIGTERM)
        answered = listen(waiting)
        assert answered is not None
        assert (answered.status, answered.document["id"]) == (202, jobs[0]["id"])
        half.sendall(body[-5:])
        late = listen(half)
        assert late is not None
        assert late.status == 202
        assert child.wait(PATIENCE_SECONDS) == 0
        with pytest.raises(ConnectionRefusedError):
            connected(port).close()


def test_log_lines_are_json_and_hold_no_bodies_credentials_or_queries() -> None:
    with process() as (child, port):
        with closing(http.client.HTTPConnection("127.0.0.1", port, timeout=PATIENCE_SECONDS)) as line:
            secret = {"Authorization": "Bearer s3cret", "X-Request-Id": "seen-in-the-log", "Cookie": "s3cret=1"}
            body = json.dumps(plain() | {"note": "s3cret"}).encode()
            line.request("POST", "/v1/jobs", body, {**secret, "Content-Type": "application/json"})
            line.getresponse().read()
            line.request("GET", "/v1/jobs?label=s3cret%0d%0a", headers=secret)
            line.getresponse().read()
            line.request("GET", "/s3cret", headers=secret)
            line.getresponse().read()
        child.send_signal(signal.SIGTERM)
        _, errors = child.communicate(timeout=PATIENCE_SECONDS)
    assert "s3cret" not in errors
    lines = [json.loads(line) for line in errors.splitlines()]
    requests = [line for line in lines if line["event"] == "request"]
    assert [(line["method"], line["route"], line["status"]) for line in requests] == [
        ("POST", "/v1/jobs", 202),
        ("GET", "/v1/jobs", 200),
        ("GET", None, 404),
    ]
    assert {line["request_id"] for line in requests} == {"seen-in-the-log"}
    assert all(line["time"] and line["level"] and line["seconds"] >= 0 for line in requests)
