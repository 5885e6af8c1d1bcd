"""A server on a real socket, and the raw conversations that tests hold with it."""

import http.client
import json
import socket
import threading
from collections.abc import Iterator
from contextlib import closing, contextmanager
from dataclasses import dataclass
from typing import Any

from service.web.application import Application, create_app
from service.web.server import Server
from service.web.settings import MEBIBYTE, WebSettings
from tests.service.fakes import FakeDocumentStore, FakeJobStore, Outage

PATIENCE_SECONDS = 20.0
SMALL = WebSettings(
    port=0, threads=8, max_body_bytes=MEBIBYTE, max_inflated_bytes=4 * MEBIBYTE, waiters=2, drain_seconds=10.0
)
"""Limits small enough to be passed in a moment; the contract's own are the defaults."""

Json = dict[str, Any]


@dataclass(frozen=True)
class Answered:
    """What came back: status, headers with names in lower case, and the body."""

    status: int
    headers: dict[str, str]
    body: bytes

    @property
    def document(self) -> Any:
        return json.loads(self.body)

    @property
    def problem(self) -> str:
        """Name of the problem type; the answer must be a whole problem document."""
        assert self.headers["content-type"] == "application/problem+json", self
        found = self.document
        assert found["status"] == self.status
        assert found["title"]
        assert found["detail"]
        assert found["instance"].startswith("urn:hourwright:request:")
        return str(found["type"]).removeprefix("/problems/")


@dataclass(frozen=True)
class Line:
    """The way to a service: where it listens."""

    port: int

    def call(self, method: str, path: str, body: object = None, **headers: str) -> Answered:
        """Hold one ordinary conversation; headers as `if_match='...'`, a body that is not bytes goes as JSON."""
        sent = {name.replace("_", "-"): value for name, value in headers.items()}
        data = body if isinstance(body, bytes) or body is None else json.dumps(body).encode()
        if data is not None:
            sent.setdefault("content-type", "application/json")
        with closing(http.client.HTTPConnection("127.0.0.1", self.port, timeout=PATIENCE_SECONDS)) as connection:
            connection.request(method, path, data, sent)
            return _answered(connection.getresponse())

    def say(self, *pieces: bytes, method: str = "POST") -> Answered | None:
        """Send bytes as they are, and read one answer; None where the connection is closed without one."""
        with closing(socket.create_connection(("127.0.0.1", self.port), PATIENCE_SECONDS)) as line:
            for piece in pieces:
                line.sendall(piece)
            return listen(line, method)

    def submit(self, job: Json) -> str:
        """Submit a job, and give its id."""
        found = self.call("POST", "/v1/jobs", job)
        assert found.status == 202, found
        return str(found.document["id"])


@dataclass(frozen=True)
class House(Line):
    """A service under test: its stores, its application, and where it listens."""

    jobs: FakeJobStore
    documents: FakeDocumentStore
    outage: Outage
    app: Application


def listen(line: socket.socket, method: str = "POST") -> Answered | None:
    """Read one answer from a socket; None where the other side closes without one."""
    response = http.client.HTTPResponse(line, method=method)
    try:
        response.begin()
    except (http.client.RemoteDisconnected, ConnectionResetError):
        return None
    with closing(response):
        return _answered(response)


def _answered(response: http.client.HTTPResponse) -> Answered:
    body = response.read()
    return Answered(response.status, {name.lower(): value for name, value in response.getheaders()}, body)


@contextmanager
def listening(app: Application, settings: WebSettings) -> Iterator[int]:
    """Serve an application until the block ends; gives the port."""
    server = Server(app, settings)
    thread = threading.Thread(target=server.serve, name="server under test")
    thread.start()
    try:
        yield server.port
    finally:
        server.stop()
        thread.join(PATIENCE_SECONDS)
        assert not thread.is_alive()


@contextmanager
def served(settings: WebSettings = SMALL) -> Iterator[House]:
    """Serve on fakes until the block ends."""
    outage = Outage()
    jobs, documents = FakeJobStore(outage), FakeDocumentStore(outage)
    app = create_app(settings, jobs, documents)
    with listening(app, settings) as port:
        yield House(port, jobs, documents, outage, app)
