"""Serve the application with waitress, and end without dropping a request."""

import logging
import signal
import time
from collections.abc import Callable
from types import FrameType
from typing import Any

from waitress import wasyncore
from waitress.server import create_server

from service.web.application import Application
from service.web.connections import Connection
from service.web.settings import WebSettings

_LOG = logging.getLogger("hourwright.server")
_TICK_SECONDS = 0.2


class Server:
    """Listens from the moment it is made; `serve` works until `stop` is called, and then until all is answered."""

    def __init__(self, app: Application, settings: WebSettings) -> None:
        self._app = app
        self._drain_seconds = settings.drain_seconds
        self._map: dict[int, Any] = {}
        self._stopping = False
        proxy: dict[str, Any] = {"trusted_proxy": settings.trusted_proxy} if settings.trusted_proxy else {}
        made: Any = create_server(
            app,
            map=self._map,
            host=settings.host,
            port=settings.port,
            threads=settings.threads,
            connection_limit=settings.connection_limit,
            channel_timeout=settings.idle_seconds,
            cleanup_interval=max(1, settings.idle_seconds // 4),
            # The application refuses bodies above its own limit, and in its own words; this one bounds what is
            # taken in before it is asked.
            max_request_body_size=2 * settings.max_body_bytes,
            max_request_header_size=2 * settings.max_header_bytes,
            asyncore_use_poll=True,
            ident=None,
            expose_tracebacks=False,
            clear_untrusted_proxy_headers=True,
            **proxy,
        )
        made.channel_class = Connection
        self._server = made

    @property
    def port(self) -> int:
        """Port that it listens on."""
        return int(self._server.effective_port)

    def stop(self) -> None:
        """Ask it to end: no new connections, requests that have begun are answered."""
        self._app.draining.set()
        self._stopping = True

    def serve(self) -> None:
        """Answer requests; returns when it was stopped and all is answered, or the time for that is over."""
        while not self._stopping:
            self._turn()
        self._server.accepting = False
        self._server.del_channel()
        self._server.socket.close()
        until = time.monotonic() + self._drain_seconds
        while self._is_busy() and time.monotonic() < until:
            self._turn()
        if self._is_busy():
            _LOG.warning("requests were left unanswered")
        self._server.task_dispatcher.shutdown(timeout=1)
        wasyncore.close_all(self._map, ignore_all=True)

    def _turn(self) -> None:
        wasyncore.loop(timeout=_TICK_SECONDS, map=self._map, use_poll=True, count=1)

    def _is_busy(self) -> bool:
        channels = list(self._server.active_channels.values())
        return any(channel.requests or channel.request or channel.total_outbufs_len for channel in channels)


def run(app: Application, settings: WebSettings, announce: Callable[[int], None] = lambda _port: None) -> int:
    """Serve until SIGTERM or SIGINT, then finish what has begun; `announce` is told the port once it listens."""
    server = Server(app, settings)

    def stop(_number: int, _frame: FrameType | None) -> None:
        server.stop()

    signal.signal(signal.SIGTERM, stop)
    signal.signal(signal.SIGINT, stop)
    _LOG.info("listening", extra={"fields": {"host": settings.host, "port": server.port}})
    announce(server.port)
    server.serve()
    _LOG.info("ended")
    return 0
