"""How long a caller is kept waiting by a Redis that does not answer, and by one that was restarted."""

import signal
import socket
from collections.abc import Iterator
from pathlib import Path
from threading import Thread

import pytest

from service import connection
from service.connection import ANSWER_SECONDS, connect
from service.settings import Settings
from service.store import StoreUnreachable
from service.store.jobs import RedisJobStore
from tests.faults.deployment import Deployment


class Silent:
    """Takes connections and never says a word."""

    def __init__(self, path: Path) -> None:
        self.taken: list[socket.socket] = []
        self._listener = socket.socket(socket.AF_UNIX)
        self._listener.bind(str(path))
        self._listener.listen()
        self._thread = Thread(target=self._take)
        self._thread.start()

    def _take(self) -> None:
        while True:
            try:
                taken, _ = self._listener.accept()
            except OSError:
                return
            self.taken.append(taken)

    def close(self) -> None:
        self._listener.shutdown(socket.SHUT_RDWR)
        self._thread.join()
        for each in (*self.taken, self._listener):
            each.close()


@pytest.fixture
def house(tmp_path: Path) -> Iterator[Deployment]:
    deployment = Deployment(tmp_path)
    yield deployment
    deployment.close()


def test_a_silent_redis_is_asked_once_and_not_for_longer_than_two_seconds(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    assert ANSWER_SECONDS <= 2
    monkeypatch.setattr(connection, "ANSWER_SECONDS", 0.2)
    silent = Silent(tmp_path / "s")
    try:
        with connect(f"unix://{tmp_path / 's'}") as redis, pytest.raises(StoreUnreachable):
            RedisJobStore(redis, Settings()).ping()
        assert len(silent.taken) == 1
    finally:
        silent.close()


def test_a_redis_that_hangs_is_out_of_reach_and_back_when_it_goes_on(house: Deployment) -> None:
    house.jobs.ping()
    assert house.redis.process is not None
    house.redis.process.send_signal(signal.SIGSTOP)
    try:
        with pytest.raises(StoreUnreachable):
            house.jobs.ping()
    finally:
        house.redis.process.send_signal(signal.SIGCONT)
    house.jobs.ping()


def test_connections_that_a_restart_has_cut_are_made_anew_unseen(house: Deployment) -> None:
    house.jobs.ping()
    assert house.redis.process is not None
    house.redis.process.kill()
    house.redis.process.wait(10)
    house.redis.start()
    house.jobs.ping()
