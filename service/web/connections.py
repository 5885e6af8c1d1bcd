"""One caller's connection, as waitress (3.0.2) handles it, with what it leaves open closed.

- Its own errors become problem documents.
- A refused request is read on for a while after the answer: closed at once, unread data would make the system reset the
  connection, and the caller would never see the refusal.
- Lines of a chunked body have limits; a length is no number of thousands of digits; a message whose length is given in
  two ways is refused (RFC 9112, section 6.3).
- HEAD is answered without even the end of a chunked body.
"""

import secrets
import socket
import time
from contextlib import suppress
from typing import Any

from waitress.channel import HTTPChannel
from waitress.parser import HTTPRequestParser, ParsingError
from waitress.receiver import ChunkedReceiver
from waitress.task import ErrorTask, WSGITask
from waitress.utilities import BadRequest

from service.web.answers import PROBLEM, SHOWN_TO_PROGRAMS, json_bytes
from service.web.problems import AnyProblemType, HttpProblem
from service.web.settings import MEBIBYTE

LONGEST_CHUNK_LINE_BYTES = 1024
LONGEST_TRAILER_BYTES = 8 * 1024
LINGER_SECONDS = 10.0
LINGER_BYTES = 256 * MEBIBYTE
_LONGEST_LENGTH_DIGITS = 15

_KINDS: dict[int, tuple[AnyProblemType, str]] = {
    400: ("bad-request", "the request is not well-formed HTTP"),
    413: ("body-too-large", "the body is larger than the server takes"),
    431: ("headers-too-large", "the request line and the headers are larger than the server takes"),
    500: ("internal", "the request id leads to what happened"),
    501: ("not-implemented", "chunked is the only transfer coding that is read here"),
}


class Request(HTTPRequestParser):
    """Reads a request from the wire."""

    def parse_header(self, header_plus: bytes) -> None:
        """Read the request line and the headers; raises ParsingError, which waitress answers with 400."""
        try:
            super().parse_header(header_plus)
        except ValueError as fault:
            raise ParsingError("a number in the headers is too long") from fault
        length = self.headers.get("CONTENT_LENGTH", "0")
        if len(length) > _LONGEST_LENGTH_DIGITS:
            raise ParsingError("Content-Length is too long")
        if self.chunked and "CONTENT_LENGTH" in self.headers:
            raise ParsingError("both Content-Length and Transfer-Encoding are given")

    def received(self, data: bytes) -> int:
        """Take in data; lines that waitress keeps until they end are cut short."""
        taken = super().received(data)
        receiver = self.body_rcv
        if isinstance(receiver, ChunkedReceiver) and not self.completed:
            endless = len(receiver.control_line) > LONGEST_CHUNK_LINE_BYTES
            if endless or len(receiver.trailer) > LONGEST_TRAILER_BYTES:
                self.error = BadRequest("a line of the chunked body does not end")
                self.completed = True
        if self.error is not None:
            self.expect_continue = False  # Or waitress would ask for the body of what it has just refused.
        return taken


class ProblemTask(ErrorTask):
    """Answers a request that waitress itself refuses."""

    def execute(self) -> None:
        """Write the refusal as a problem document, and close."""
        refused: Any = self.request
        error = refused.error
        kind, detail = _KINDS.get(error.code, _KINDS[400])
        problem = HttpProblem(kind, detail)
        request_id = secrets.token_hex(16)
        body = json_bytes(problem.document(request_id))
        self.status = f"{error.code} {error.reason}"
        headers = {"Content-Type": PROBLEM, "X-Request-Id": request_id, **SHOWN_TO_PROGRAMS}
        self.response_headers = [*self.response_headers, *headers.items()]
        self.set_close_on_finish()
        self.content_length = len(body)
        if isinstance(self.channel, Connection):
            self.channel.refused = True
        self.write(body)


class AnswerTask(WSGITask):
    """Answers a request by the application."""

    def finish(self) -> None:
        """End the answer; one to HEAD has no body, and so no end of a chunked one."""
        asked: Any = self.request
        if asked.command.upper() != "HEAD":
            super().finish()
        elif not self.wrote_header:
            self.write(b"")


class Connection(HTTPChannel):
    """A caller's connection; after a refusal what still comes is read and dropped for a while."""

    parser_class = Request
    task_class = AnswerTask
    error_task_class = ProblemTask
    refused = False
    _linger_until = 0.0
    _dropped_bytes = 0

    def readable(self) -> bool:
        """Tell whether data is wanted; while it lingers, it is."""
        return bool(self._linger_until) or bool(super().readable())

    def handle_read(self) -> None:
        """Take data in, or drop it."""
        if not self._linger_until:
            super().handle_read()
            return
        try:
            data = self.recv(self.adj.recv_bytes)
        except OSError:
            data = b""
        self._dropped_bytes += len(data)
        if not data or self._dropped_bytes > LINGER_BYTES or time.monotonic() > self._linger_until:
            self._linger_until = 0.0
            self.handle_close()

    def handle_write(self) -> None:
        """Send what waits to be sent; after a refusal, close our half only."""
        if self.refused and self.close_when_flushed and not self._linger_until:
            waitress: Any = self  # these two are left out of its published types
            waitress._flush_exception(waitress._flush_some)
            if self.total_outbufs_len or self.will_close:
                if self.will_close:
                    self.handle_close()
                return
            self.close_when_flushed = False
            self._linger_until = time.monotonic() + LINGER_SECONDS
            with suppress(OSError):
                if self.socket is not None:
                    self.socket.shutdown(socket.SHUT_WR)
            return
        super().handle_write()

    def writable(self) -> bool:
        """Tell whether there is something to be sent, or the connection is to be closed."""
        if self._linger_until and time.monotonic() > self._linger_until:
            self.will_close = True
        return bool(super().writable())
