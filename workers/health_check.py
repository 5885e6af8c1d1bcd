"""Look in Redis for the life of this container's process: `python -m workers.health_check work` (or `keep`).

A worker is alive if one of this host's on its queue has sent a heartbeat lately; its main thread sends them, so one
that hangs sends none. A keeper is alive if some keeper holds the lock, which is given up for lost after seconds: one
that stands by, or hangs while another is at work, does not show.
"""

import socket
import sys
from collections.abc import Sequence
from datetime import UTC, datetime
from typing import Any

from redis import Redis
from redis.exceptions import RedisError

from schemas.records import Keys, rq_prefix
from workers.settings import Settings, settings

ANSWER_SECONDS = 3.0
SEEN_SECONDS = 17.0
"""Heartbeats come every two seconds; while a restart of Redis is waited for, they are late."""


def main(arguments: Sequence[str]) -> int:
    """Return 0 if the process is alive, 1 with a line on standard error if not, 2 if not told which to look for."""
    if list(arguments) not in (["work"], ["keep"]):
        print("which one: work or keep?", file=sys.stderr)
        return 2
    chosen = settings()
    # Not the workers' own connection, which is patient; nor RQ, which takes longer to import than this takes to run.
    with Redis.from_url(
        chosen.redis_url,
        password=chosen.redis_password,
        socket_timeout=ANSWER_SECONDS,
        socket_connect_timeout=ANSWER_SECONDS,
        protocol=2,
    ) as redis:
        try:
            lack = _worker_lack(redis, chosen) if arguments[0] == "work" else _keeper_lack(redis, chosen)
        except RedisError as fault:
            lack = f"Redis: {fault}"
    if lack:
        print(lack, file=sys.stderr)
    return 1 if lack else 0


def _worker_lack(redis: "Redis", chosen: Settings) -> str | None:
    """Say what is missing for a worker of this host to be alive; None if nothing is."""
    # The layout of RQ's keys, which a test compares with a worker's own.
    names: Any = redis.smembers(f"{rq_prefix(chosen.key_prefix)}:workers:{chosen.queue}")
    host = socket.gethostname()
    for name in names:
        answer: Any = redis.hmget(name, ["hostname", "last_heartbeat", "death"])
        its_host, heard, death = (None if part is None else part.decode() for part in answer)
        if its_host == host and heard and not death and _seconds_since(heard) < SEEN_SECONDS:
            return None
    return f"no worker of {host} on the queue {chosen.queue} has sent a heartbeat in {SEEN_SECONDS:g} s"


def _keeper_lack(redis: "Redis", chosen: Settings) -> str | None:
    return None if redis.exists(Keys(chosen.key_prefix).keeper) else "no keeper is at work"


def _seconds_since(instant: str) -> float:
    moment = datetime.fromisoformat(instant)
    return abs((datetime.now(UTC) - (moment if moment.tzinfo else moment.replace(tzinfo=UTC))).total_seconds())


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
