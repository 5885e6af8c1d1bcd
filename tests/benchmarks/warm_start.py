"""Measure what an earlier schedule saves when a request changes a little and is planned again.

    python -m tests.benchmarks.warm_start [--rounds 5] [--units 10]

A fleet is planned; each round moves its prices (or its fuel costs) and plans that twice: from nothing, and from the
first schedule, both to the gap asked for. Seconds are those of the whole of `plan`. A round in which the earlier
schedule is not good enough any more costs what looking at it took: medians and the worst ratio are both told.
"""

import argparse
from collections.abc import Callable, Sequence
from datetime import UTC, datetime
from statistics import median
from time import perf_counter
from typing import Any

import numpy as np

from schemas.reading import read_job
from schemas.schedule import Schedule
from tests.benchmarks import fleets
from tests.workers.planning.test_unit_commitment import REFERENCE, system
from workers.planning.limits import Limits
from workers.planning.plan import plan

Request = dict[str, Any]
STORES = 20


def planned(request: Request, earlier: Schedule | None = None) -> tuple[Schedule, float]:
    """Plan a request; return the schedule and the seconds it took."""
    job = read_job(request)
    began = perf_counter()
    found = plan(job, Limits.of(job, datetime.now(UTC)), earlier=earlier)
    took = perf_counter() - began
    if not isinstance(found, Schedule):
        raise ValueError(f"a schedule is expected, not {found.outcome}")
    return found, took


def with_prices_moved(request: Request, share: float, seed: int) -> Request:
    """Move each price by a normal share of itself."""
    random = np.random.default_rng(seed)
    moved = [round(price * (1 + share * random.normal()), 2) for price in request["window"]["price_per_mwh"]]
    return request | {"window": request["window"] | {"price_per_mwh": moved}}


def with_fuel_moved(request: Request, share: float, seed: int) -> Request:
    """Move what each generator's fuel costs by a normal share of itself."""
    random = np.random.default_rng(seed)
    assets = [dict(asset) for asset in request["fleet"]["assets"]]
    for asset in assets:
        if asset["kind"] == "generator":
            linear = asset["cost"]["linear_per_mwh"] * (1 + share * random.normal())
            asset["cost"] = asset["cost"] | {"linear_per_mwh": round(linear, 3)}
    return request | {"fleet": request["fleet"] | {"assets": assets}}


def told(name: str, first: Request, move: Callable[[Request, int], Request], rounds: int) -> str:
    """Measure one case, and write it as a line."""
    before, _ = planned(first)
    pairs = []
    for seed in range(rounds):
        request = move(first, seed)
        cold, warm = planned(request), planned(request, before)
        pairs.append((cold[1], warm[1], cold[0].relative_gap or 0.0, warm[0].relative_gap or 0.0))
    ratios = [cold / warm for cold, warm, *_ in pairs]
    cells = [f"{median(column):.3g}" for column in zip(*pairs, strict=True)]
    return f"| {' | '.join([name, *cells, f'{median(ratios):.2f}', f'{min(ratios):.2f}', f'{max(ratios):.2f}'])} |"


def main(arguments: Sequence[str] | None = None) -> None:
    """Measure all cases."""
    parser = argparse.ArgumentParser(prog="python -m tests.benchmarks.warm_start")
    parser.add_argument("--rounds", type=int, default=5)
    parser.add_argument("--units", type=int, default=10, help="generators of the published system, a multiple of ten")
    asked = parser.parse_args(arguments)
    print("| case | cold s | warm s | cold gap | warm gap | cold/warm | worst | best |")
    print(f"|{'---|' * 8}")
    for share in (0.0, 0.005, 0.02):
        stores = fleets.coupled(STORES, seed=1)
        print(told(f"{STORES} stores, prices by {share:.1%}", stores, _prices(share), asked.rounds), flush=True)
    for share in (0.0, 0.005):
        units = system(asked.units, REFERENCE["reserve_fraction"], time_limit_seconds=120)
        print(told(f"{asked.units} units, fuel by {share:.1%}", units, _fuel(share), asked.rounds), flush=True)


def _prices(share: float) -> Callable[[Request, int], Request]:
    return lambda request, seed: with_prices_moved(request, share, seed)


def _fuel(share: float) -> Callable[[Request, int], Request]:
    return lambda request, seed: with_fuel_moved(request, share, seed)


if __name__ == "__main__":
    main()
