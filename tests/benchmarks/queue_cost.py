"""What the queue costs: `python -m tests.benchmarks.queue_cost`; figures only, no limit is asserted here.

1. One small job, from its submission to its end in the record, against the bare plan of the same request.
2. 200 small jobs from 4 callers, jobs a second, against RQ's stock fork worker with the solvers preloaded, in turns.
"""

import os
import statistics
import subprocess
import sys
import tempfile
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from datetime import UTC, datetime
from pathlib import Path
from threading import Event
from time import monotonic, perf_counter

from rq import Queue

from tests.benchmarks import stock_worker
from tests.faults import jobs
from tests.faults.deployment import Deployment
from workers.planning.limits import Limits
from workers.planning.plan import plan

CALLERS = 4
TURNS = 4
JOBS_A_TURN = 50
SINGLE_JOBS = 60
ROOT = Path(__file__).resolve().parents[2]


def main() -> None:
    """Measure both and print them."""
    with tempfile.TemporaryDirectory() as folder:
        deployment = Deployment(Path(folder))
        stock = None
        try:
            deployment.worker()
            one_job(deployment)
            stock = subprocess.Popen(
                [sys.executable, "-m", "tests.benchmarks.stock_worker", str(deployment.redis.socket)],
                cwd=ROOT,
                env={**os.environ, "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"},
            )
            many_jobs(deployment)
        finally:
            if stock is not None:
                stock.kill()
                stock.wait()
            deployment.close()
    print(f"load average {os.getloadavg()[0]:.1f} on {os.cpu_count()} processors")


def one_job(deployment: Deployment) -> None:
    """Measure single jobs in turns with bare plans."""
    accepted = jobs.small()
    bare, whole = [], []
    for _ in range(SINGLE_JOBS):
        began = perf_counter()
        plan(accepted.job, Limits.of(accepted.job, datetime.now(UTC)))
        bare.append(perf_counter() - began)
        began = perf_counter()
        job_id = deployment.jobs.submit(accepted).record.id
        assert deployment.jobs.wait(job_id, 30).state == "finished"
        whole.append(perf_counter() - began)
        Event().wait(0.05)  # the worker is ready for the next one
    more = [w - b for w, b in zip(whole, bare, strict=True)]
    print(
        f"one job: bare {statistics.median(bare) * 1e3:.1f} ms, submitted to ended "
        f"{statistics.median(whole) * 1e3:.1f} ms; above the bare plan: median {statistics.median(more) * 1e3:.1f} ms, "
        f"least {min(more) * 1e3:.1f} ms"
    )


def many_jobs(deployment: Deployment) -> None:
    """Measure the two workers in turns, the other one idle."""
    accepted = jobs.small()
    queue = Queue(stock_worker.QUEUE, connection=deployment.client, serializer="json")
    text = accepted.resolved.decode()

    def stocks() -> None:
        carried = queue.enqueue(stock_worker.TASK, text, result_ttl=60)
        while carried.get_status() != "finished":
            Event().wait(0.002)

    def ours() -> None:
        job_id = deployment.jobs.submit(accepted).record.id
        assert deployment.jobs.wait(job_id, 30).state == "finished"

    stocks()  # it has started
    seconds = {"stock": 0.0, "ours": 0.0}
    for _ in range(TURNS):
        for name, act in (("stock", stocks), ("ours", ours)):
            seconds[name] += _in_parallel(act)
    rates = {name: TURNS * JOBS_A_TURN / spent for name, spent in seconds.items()}
    print(
        f"{TURNS * JOBS_A_TURN} jobs from {CALLERS} callers: stock {rates['stock']:.1f}/s, ours {rates['ours']:.1f}/s, "
        f"{rates['ours'] / rates['stock']:.2f} times"
    )


def _in_parallel(act: Callable[[], None]) -> float:
    began = monotonic()
    with ThreadPoolExecutor(CALLERS) as pool:
        for done in [pool.submit(act) for _ in range(JOBS_A_TURN)]:
            done.result()
    return monotonic() - began


if __name__ == "__main__":
    main()
