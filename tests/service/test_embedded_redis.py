"""Redis of one's own: one at a time on a folder, for this user only, and nothing lost when it is killed."""

import os
import signal
import stat
import subprocess
import sys
from pathlib import Path
from threading import Event
from time import monotonic

import pytest
from redis import Redis

from service.embedded_redis import DataFolder, DataInUse, EmbeddedRedis, RedisDidNotStart
from service.redis_server import RedisServer, find_server


def started(folder: Path) -> tuple[DataFolder, EmbeddedRedis]:
    data = DataFolder(folder)
    data.hold()
    redis = EmbeddedRedis(data, find_server(), 64 * 2**20)
    redis.start()
    return data, redis


def test_what_was_written_outlives_a_kill_of_the_server(tmp_path: Path) -> None:
    data, redis = started(tmp_path / "data")
    try:
        with Redis(unix_socket_path=str(redis.socket)) as client:
            client.set("kept", "1")
        assert redis.process is not None
        redis.process.kill()
        redis.process.wait(10)
        redis.start()
        with Redis(unix_socket_path=str(redis.socket)) as client:
            assert client.get("kept") == b"1"
    finally:
        redis.stop()
        data.release()


def test_it_listens_on_no_port_and_on_a_socket_for_this_user_alone(tmp_path: Path) -> None:
    data, redis = started(tmp_path / "data")
    try:
        for folder in (redis.socket.parent, data.redis_folder):
            assert stat.S_IMODE(folder.stat().st_mode) == 0o700
        assert stat.S_IMODE(redis.socket.stat().st_mode) == 0o700
        assert len(os.fsencode(redis.socket)) < 108
        with Redis(unix_socket_path=str(redis.socket)) as client:
            kept = client.config_get("*")
        wanted = {"port": "0", "appendonly": "yes", "appendfsync": "everysec", "maxmemory-policy": "noeviction"}
        assert {name: kept[name] for name in wanted} == wanted
    finally:
        redis.stop()
        data.release()
    assert not redis.socket.parent.exists()


def test_a_folder_in_use_is_refused_in_one_line(tmp_path: Path) -> None:
    first = DataFolder(tmp_path)
    first.hold()
    with pytest.raises(DataInUse) as told:
        DataFolder(tmp_path).hold()
    assert str(os.getpid()) in str(told.value)
    first.release()
    second = DataFolder(tmp_path)
    second.hold()
    second.release()


PROGRAM = """
import sys
from pathlib import Path
from threading import Event
from tests.service.test_embedded_redis import started
data, redis = started(Path(sys.argv[1]))
print(redis.process.pid, redis.socket, flush=True)
Event().wait()
"""


def test_when_the_program_is_killed_its_redis_ends_and_the_folder_is_free(tmp_path: Path) -> None:
    root = Path(__file__).resolve().parents[2]
    folder = tmp_path / "data"
    program = subprocess.Popen(
        [sys.executable, "-c", PROGRAM, str(folder)], cwd=root, stdout=subprocess.PIPE, text=True
    )
    assert program.stdout is not None
    with program.stdout as said:
        pid, socket = said.readline().split()
        with Redis(unix_socket_path=socket) as client:
            client.set("kept", "1")
        program.send_signal(signal.SIGKILL)
        program.wait(10)
    data, redis = started(folder)
    try:
        assert not Path(socket).parent.exists()
        until = monotonic() + 10
        while Path(f"/proc/{pid}").exists():
            assert monotonic() < until
            Event().wait(0.02)
        with Redis(unix_socket_path=str(redis.socket)) as client:
            assert client.get("kept") == b"1"
    finally:
        redis.stop()
        data.release()


def test_a_server_that_will_not_start_is_said_with_its_last_words(tmp_path: Path) -> None:
    data = DataFolder(tmp_path)
    data.hold()
    real = find_server()
    broken = RedisServer(Path("/bin/false"), real.kind, real.version, "for this test")
    redis = EmbeddedRedis(data, broken)
    try:
        with pytest.raises(RedisDidNotStart, match="ended at once"):
            redis.start()
    finally:
        redis.stop()
        data.release()
