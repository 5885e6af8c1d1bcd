"""What HTTP and the queue cost one small job: `python -m tests.benchmarks.http_latency`; figures only, no limit.

A whole service on the embedded Redis; a caller that keeps its connection submits a job with `Prefer: wait` and fetches
the schedule. In turns with that, the bare plan of the same request in this process. Submit to schedule in hand, against
the bare solve.
"""

import os
import statistics
from collections.abc import Sequence
from datetime import UTC, datetime
from http.client import HTTPConnection
from threading import Event
from time import perf_counter
from typing import Any

from schemas.json_text import read_json
from service.demo.own_service import own_service
from tests.faults import jobs
from workers.planning.limits import Limits
from workers.planning.plan import plan

ROUNDS = 30
WARM_UP = 3
SUBMISSION = {"Content-Type": "application/json", "Prefer": "wait=30"}


def main() -> None:
    """Measure and print."""
    accepted = jobs.small()
    bare, whole = [], []
    with own_service() as api:
        connection = HTTPConnection(api.host, api.port, timeout=60)
        for turn in range(-WARM_UP, ROUNDS):
            began = perf_counter()
            plan(accepted.job, Limits.of(accepted.job, datetime.now(UTC)))
            solved = perf_counter() - began
            began = perf_counter()
            job = _answered(connection, "POST", "/v1/jobs", accepted.resolved, SUBMISSION)
            schedule = _answered(connection, "GET", job["links"]["schedule"])
            took = perf_counter() - began
            assert schedule["outcome"] == "optimal"
            if turn >= 0:
                bare.append(solved)
                whole.append(took)
            Event().wait(0.05)  # the worker is ready for the next one
        connection.close()
    above = [with_http - solved for with_http, solved in zip(whole, bare, strict=True)]
    print(f"bare plan           {_figures(bare)}")
    print(f"submit to schedule  {_figures(whole)}")
    print(f"above the bare plan {_figures(above)}")
    print(f"ratio of medians {statistics.median(whole) / statistics.median(bare):.1f}, {ROUNDS} rounds")
    print(f"load average {os.getloadavg()[0]:.1f} on {os.cpu_count()} processors")


def _answered(
    connection: HTTPConnection, method: str, path: str, body: bytes | None = None, headers: dict[str, str] | None = None
) -> Any:
    connection.request(method, path, body, headers or {})
    answer = connection.getresponse()
    document = read_json(answer.read())
    assert answer.status in (200, 202), document
    return document


def _figures(seconds: Sequence[float]) -> str:
    return (
        f"median {statistics.median(seconds) * 1e3:6.1f} ms, least {min(seconds) * 1e3:6.1f} ms, "
        f"most {max(seconds) * 1e3:6.1f} ms"
    )


if __name__ == "__main__":
    main()
