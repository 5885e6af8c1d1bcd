"""Everything on one machine: Redis of its own, the API, a keeper and workers, each a child of this process."""

import logging
import os
import signal
import socket
import sys
from collections.abc import Mapping
from dataclasses import dataclass
from ipaddress import ip_address
from pathlib import Path
from time import monotonic

from service.calling import Api, NotReached, url_of
from service.children import Child
from service.command_help import OPEN_ON_LOOPBACK_ONLY
from service.embedded_redis import DataFolder, DataInUse, EmbeddedRedis, RedisDidNotStart
from service.processes import Process, command_of, environment_of
from service.redis_server import NoRedisServer, find_server
from service.sample.loading import NotTaken, load

log = logging.getLogger(__name__)

TICK_SECONDS = 0.5
GRACE_SECONDS = 3.0
DRAIN_SECONDS = 5.0
STOP_SECONDS = 15.0
"""What children have to end, the workers' grace included; then they are killed, and Redis ends last."""

SAMPLE_SECONDS = 5.0
"""So long each document of the sample may take."""

EARLY_FAILURES = 4
"""A child that ends early so often in a row, before the API has answered once, will not get better by itself."""

PASSWORD = "HOURWRIGHT_REDIS_PASSWORD_FILE"
"""Of another Redis: the embedded one has none, and refuses whoever gives one."""

LOG_FORMAT = "%(asctime)s %(levelname)s %(name)s: %(message)s"


class CannotRun(RuntimeError):  # noqa: N818 - says what it is
    """This cannot be run as asked; the message is one line for a person."""


@dataclass(frozen=True)
class Wish:
    """What `hourwright up` was asked for."""

    data: Path
    host: str = "127.0.0.1"
    port: int = 8080
    workers: int = 1
    no_auth: bool = False
    sample: bool = False

    def require_safe(self) -> None:
        """Raise CannotRun for what would leave the service open to others."""
        if not self.no_auth or not _is_loopback(self.host):
            raise CannotRun(OPEN_ON_LOOPBACK_ONLY)

    def require_free_port(self) -> None:
        """Raise CannotRun where something else listens already: its answers would be taken for ours."""
        try:
            family, kind, _, _, address = socket.getaddrinfo(self.host, self.port, type=socket.SOCK_STREAM)[0]
            with socket.socket(family, kind) as tried:
                tried.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)  # as the API will: for ports just left
                tried.bind(address)
        except OSError as fault:
            where = f"{self.host}, port {self.port}"
            raise CannotRun(f"cannot listen at {where}: {fault.strerror or fault}; --port takes another") from fault


def up(wish: Wish) -> int:
    """Run until told to stop; returns the exit status, 2 where it cannot run as asked."""
    logging.basicConfig(stream=sys.stderr, level=logging.INFO, format=LOG_FORMAT)
    data = DataFolder(wish.data)
    try:
        wish.require_safe()
        wish.require_free_port()
        server = find_server()
        data.hold()
    except (CannotRun, NoRedisServer, DataInUse, OSError) as refusal:
        print(f"hourwright up: {refusal}", file=sys.stderr)
        return 2
    log.info("Redis: %s", server)
    # Held back, and waited for in one place: nothing is interrupted halfway. Children set their own mask.
    signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGTERM, signal.SIGINT, signal.SIGCHLD})
    redis = EmbeddedRedis(data, server)
    try:
        redis.start()
        return _Household(wish, redis).run()
    except RedisDidNotStart as fault:
        print(f"hourwright up: {fault}", file=sys.stderr)
        return 1
    finally:
        redis.stop()
        data.release()


class _Household:
    """The children, from their start to their end."""

    def __init__(self, wish: Wish, redis: EmbeddedRedis) -> None:
        self._wish = wish
        self._redis = redis
        self._answers = False
        self._lacks_sample = wish.sample
        self._children = _children(wish, redis.url, os.environ)

    def run(self) -> int:
        for child in self._children:
            child.start()
        status = 0
        while (heard := _heard(TICK_SECONDS)) not in (signal.SIGTERM, signal.SIGINT):
            if heard is None and not self._answers and _listens(self._wish.host, self._wish.port):
                self._answers = True
                print(f"Hourwright answers at {url_of(self._wish.host, self._wish.port)}", flush=True)
            if self._answers and self._lacks_sample:
                self._load_sample()
            self._look_after()
            if not self._answers and any(child.failures_in_a_row >= EARLY_FAILURES for child in self._children):
                names = ", ".join(child.name for child in self._children if child.failures_in_a_row)
                print(f"hourwright up: {names} will not start; what was said is above", file=sys.stderr)
                status = 1
                break
        self._stop()
        return status

    def _look_after(self) -> None:
        if self._redis.process is None or self._redis.process.poll() is not None:
            log.warning("Redis ended and is started again")
            self._redis.start()
        for child in self._children:
            child.look_after()

    def _load_sample(self) -> None:
        try:
            lines = list(load(Api(self._wish.host, self._wish.port, SAMPLE_SECONDS)))
        except (NotReached, NotTaken) as fault:
            log.warning("the sample is not loaded yet: %s", fault)
            return
        self._lacks_sample = False
        print("\n".join(lines), flush=True)

    def _stop(self) -> None:
        log.info("stopping: running jobs have %g s to end, then they go back to their queue", GRACE_SECONDS)
        for child in self._children:
            child.ask_to_stop()
        until = monotonic() + STOP_SECONDS
        for child in self._children:
            child.await_end(until - monotonic())


def _children(wish: Wish, redis_url: str, surroundings: Mapping[str, str]) -> list[Child]:
    """Make each child, not yet started; settings of the surroundings hold where `up` has no say."""
    common = {
        "HOURWRIGHT_GRACE_SECONDS": str(GRACE_SECONDS),
        "HOURWRIGHT_DRAIN_SECONDS": str(DRAIN_SECONDS),
        **{name: value for name, value in surroundings.items() if name.upper() != PASSWORD},
        "HOURWRIGHT_REDIS_URL": redis_url,
        "HOURWRIGHT_HOST": wish.host,
        "HOURWRIGHT_PORT": str(wish.port),
        "HOURWRIGHT_NO_AUTH": str(wish.no_auth).lower(),
    }

    def child(name: str, process: Process, **own: str) -> Child:
        return Child(name, command_of(process), environment_of(process, {**common, **own}))

    return [
        child("API", "serve"),
        child("keeper", "keep"),
        *(child(f"worker {number}", "work", HOURWRIGHT_QUEUE="jobs") for number in range(1, wish.workers + 1)),
        child("urgent worker", "work", HOURWRIGHT_QUEUE="urgent"),
    ]


def _heard(seconds: float) -> signal.Signals | None:
    """Wait for a signal, that of a child's end included."""
    told = signal.sigtimedwait({signal.SIGTERM, signal.SIGINT, signal.SIGCHLD}, seconds)
    return None if told is None else signal.Signals(told.si_signo)


def _listens(host: str, port: int) -> bool:
    try:
        with socket.create_connection((host, port), timeout=0.2):
            return True
    except OSError:
        return False


def _is_loopback(host: str) -> bool:
    try:
        return ip_address(host).is_loopback
    except ValueError:
        return host == "localhost"
