"""Call the API over HTTP, as any other caller would."""

import json
from collections.abc import Mapping
from dataclasses import dataclass
from http.client import HTTPConnection, HTTPException
from typing import Any

LONGEST_WAIT_SECONDS = 30


class NotReached(RuntimeError):  # noqa: N818 - says what it is
    """The API did not answer; the message says why."""


@dataclass(frozen=True)
class Answered:
    """An answer: its status, its headers by their names in small letters, its body."""

    status: int
    headers: Mapping[str, str]
    body: bytes

    @property
    def document(self) -> Any:
        """Read the body as JSON."""
        return json.loads(self.body)


class Api:
    """An API at an address of this machine; no proxy is asked, whatever the environment says."""

    def __init__(self, host: str, port: int, patience_seconds: float = LONGEST_WAIT_SECONDS + 30.0) -> None:
        self.host = host
        self.port = port
        self._patience_seconds = patience_seconds

    @property
    def url(self) -> str:
        """Give the address as one writes it."""
        return url_of(self.host, self.port)

    def ask(self, method: str, path: str, document: object = None, **headers: str) -> Answered:
        """Make one request; `_` in the name of a header stands for `-`. Raises NotReached."""
        named = {name.replace("_", "-"): value for name, value in headers.items()}
        body = None
        if document is not None:
            body = json.dumps(document, allow_nan=False).encode()
            named["Content-Type"] = "application/json"
        connection = HTTPConnection(self.host, self.port, timeout=self._patience_seconds)
        try:
            connection.request(method, path, body, named)
            answer = connection.getresponse()
            heard = {name.lower(): value for name, value in answer.getheaders()}
            return Answered(answer.status, heard, answer.read())
        except (OSError, HTTPException) as fault:
            raise NotReached(f"{method} {self.url}{path}: {str(fault) or type(fault).__name__}") from fault
        finally:
            connection.close()

    def is_ready(self) -> bool:
        """Tell whether jobs and documents are taken."""
        try:
            return self.ask("GET", "/health/ready").status == 200
        except NotReached:
            return False


def url_of(host: str, port: int) -> str:
    """Write the address of an API; one of IPv6 stands in brackets (RFC 3986, section 3.2.2)."""
    return f"http://[{host}]:{port}" if ":" in host else f"http://{host}:{port}"
