"""Run a keeper: `python -m workers.keep_process`, which is what `hourwright keep` starts."""

import logging
import signal
import sys
from threading import Event
from uuid import uuid4

from redis.exceptions import RedisError

from schemas.records import Keys
from workers.connection import connect, require_prefix
from workers.keeper import TICK_SECONDS, Keeper
from workers.settings import settings

LOG_FORMAT = "%(asctime)s %(levelname)s %(name)s: %(message)s"
RETRIES = 3

log = logging.getLogger(__name__)


def main() -> int:
    """Tick until told to stop; Redis may go and come back."""
    logging.basicConfig(stream=sys.stderr, level=logging.INFO, format=LOG_FORMAT)
    chosen = settings()
    require_prefix(chosen.key_prefix)
    redis = connect(chosen.redis_url, chosen.redis_password, retries=RETRIES)
    keeper = Keeper(redis, Keys(chosen.key_prefix), uuid4().hex)
    stop = Event()
    for number in (signal.SIGTERM, signal.SIGINT):
        signal.signal(number, lambda _signum, _frame: stop.set())
    holds: bool | None = None
    while not stop.is_set():
        held, holds = holds, tick(keeper)
        if holds is not None and holds != held:
            log.info("this keeper %s", "is at work" if holds else "stands by: another one is at work")
        stop.wait(TICK_SECONDS)
    if holds:
        keeper.step_down()
    return 0


def tick(keeper: Keeper) -> bool | None:
    """Tick once; None where Redis is away or full, and nothing that was seen before counts any more."""
    try:
        return keeper.tick()
    except RedisError as fault:
        log.warning("Redis: %s", fault)
        keeper.look_anew()
        return None


if __name__ == "__main__":
    sys.exit(main())
