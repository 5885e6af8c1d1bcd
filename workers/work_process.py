"""Run a worker: `python -m workers.work_process`, which is what `hourwright work` starts."""

import gc
import logging
import sys
from pathlib import Path

from rq import Queue

from workers.connection import connect, require_prefix
from workers.settings import settings
from workers.tasks import contract
from workers.worker import PlanningWorker

LOG_FORMAT = "%(asctime)s %(levelname)s %(name)s: %(message)s"
ONE_THREAD = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")


class ThreadsBeforeFork(RuntimeError):  # noqa: N818 - says what it is
    """This process has more than one thread: a child forked from it could hang on a lock that no thread holds."""


def main() -> int:
    """Work until told to stop. Solvers are imported here and run in children only."""
    logging.basicConfig(stream=sys.stderr, level=logging.INFO, format=LOG_FORMAT)
    chosen = settings()
    require_prefix(chosen.key_prefix)
    require_one_thread()
    redis = connect(chosen.redis_url, chosen.redis_password)
    queue = Queue(chosen.queue, connection=redis, serializer="json")
    contract()
    gc.collect()
    gc.freeze()  # children share these pages; a collection there would copy them
    worker = PlanningWorker(queue, redis, chosen)
    worker.work(logging_level="WARNING")
    return 0


def require_one_thread() -> None:
    """Raise ThreadsBeforeFork where imports have left threads behind, as numerical libraries do unless told not to."""
    count = sum(1 for _ in Path("/proc/self/task").iterdir())
    if count > 1:
        raise ThreadsBeforeFork(f"{count} threads run; set {', '.join(ONE_THREAD)} to 1 before Python starts")


if __name__ == "__main__":
    sys.exit(main())
