"""RQ's own fork worker with the solvers preloaded, set up in the plain way: what our queue is measured against."""

import os
import sys
from datetime import UTC, datetime
from functools import cache
from typing import Any

import rq.serializers
from pydantic import TypeAdapter
from redis import Redis
from rq import Queue, Worker

from schemas.job import Job
from workers.planning.limits import Limits
from workers.planning.plan import plan

QUEUE = "stock"
TASK = "tests.benchmarks.stock_worker.planned"


@cache
def contract() -> TypeAdapter[Job]:
    """Build the reader of jobs once, before the fork."""
    return TypeAdapter(Job)


def planned(request: str) -> dict[str, Any]:
    """Plan a request and return the whole answer, which RQ keeps."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), 1)
    job = contract().validate_json(request)
    return plan(job, Limits.of(job, datetime.now(UTC))).model_dump(mode="json")


def main(socket: str) -> None:
    """Work until told to stop."""
    connection = Redis(unix_socket_path=socket)
    contract()
    Worker([Queue(QUEUE, connection=connection, serializer="json")], connection=connection, serializer="json").work(
        logging_level="WARNING"
    )


if __name__ == "__main__":
    rq.serializers.PickleSerializer = rq.serializers.JSONSerializer  # type: ignore[assignment]
    main(sys.argv[1])
