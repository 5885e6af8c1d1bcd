"""Plan one request in a process of its own and say what it took.

    python -m tests.benchmarks.planned request.json [--threads 1] [--repeat 1]

Seconds are those of the whole of `plan`: indexing, screening, models, solver, extraction, audit and answer. Reading and
validating the request is told apart: the other tools do none. Prints one JSON line.
"""

import argparse
import json
import os
from collections.abc import Sequence
from datetime import UTC, datetime
from pathlib import Path
from statistics import median
from time import perf_counter
from typing import Any

from schemas.job import Job
from schemas.reading import read_job
from schemas.schedule import Schedule
from workers.planning.limits import Limits
from workers.planning.plan import plan

Request = dict[str, Any]


def main(arguments: Sequence[str] | None = None) -> None:
    """Plan a request and print one line."""
    parser = argparse.ArgumentParser(prog="python -m tests.benchmarks.planned")
    parser.add_argument("request", type=Path)
    parser.add_argument("--threads", type=int, default=1, help="0: one for each processor this process may use")
    parser.add_argument("--repeat", type=int, default=1, help="plan so often; seconds of the first and of the median")
    asked = parser.parse_args(arguments)
    document = json.loads(asked.request.read_text(encoding="utf-8"))
    threads = asked.threads or len(os.sched_getaffinity(0))
    began = perf_counter()
    job = read_job(document)
    read = perf_counter() - began
    seconds = []
    answers = []
    for _ in range(asked.repeat):
        answer, took = timed(job, threads)
        answers.append(answer)
        seconds.append(took)
    print(json.dumps(told(document, answers[0], seconds[0]) | {"read_s": read, "median_s": median(seconds)}))


def timed(job: Job, threads: int) -> tuple[Schedule, float]:
    """Plan, and return the schedule with the seconds it took; anything but a schedule raises ValueError."""
    began = perf_counter()
    answer = plan(job, Limits.of(job, datetime.now(UTC), threads=threads))
    took = perf_counter() - began
    if not isinstance(answer, Schedule):
        raise ValueError(f"a schedule is expected, not {answer.outcome}")
    return answer, took


def told(document: Request, answer: Schedule, seconds: float) -> Request:
    """Say what a plan took and how good it is; `margins` are recomputed here, per asset, from its powers."""
    effort = answer.provenance
    return {
        "assets": len(answer.assets),
        "total_s": seconds,
        "build_s": effort.build_seconds,
        "solve_s": effort.solver_seconds,
        "status": [answer.outcome],
        "method": answer.method,
        "margin": answer.margin,
        "bound": answer.margin_bound,
        "margins": margins(document, answer),
    }


def margins(document: Request, answer: Schedule) -> list[float]:
    """Return what each asset's powers earn at the request's one price, less wear: no more than that is asked here."""
    hours = int(document["window"]["interval"].removeprefix("PT").removesuffix("M")) / 60
    price = document["window"]["price_per_mwh"]
    found = []
    for asset, schedule in zip(document["fleet"]["assets"], answer.assets, strict=True):
        wear = asset.get("wear_cost_per_mwh", 0.0)
        pairs = zip(price, schedule.power_mw, strict=True)
        found.append(hours * sum(per_mwh * power - wear * max(power, 0.0) for per_mwh, power in pairs))
    return found


if __name__ == "__main__":
    main()
