"""Draw small generator jobs whose optimum lies on a grid, and tell the margin of an output series by replay, no model.

All outputs, limits and hourly ramps are whole multiples of 0.5 MW, money is linear: ramps and limits are differences of
variables with whole right-hand sides, so some best schedule lies on that grid (total unimodularity).
"""

from __future__ import annotations

import random
from typing import Any

from tests.oracles.formulation_clock import Job
from tests.oracles.plain_jobs import at, generator, job, owed

HOURS = 6
LEVELS_MW = (0.0, 1.0, 1.5, 2.0)
LONG = 99


def generator_job(seed: int) -> Job:
    """Return a job of one generator of 1-2 MW with start costs, times, ramps, a state at the start and an outage."""
    draw = random.Random(seed)
    unit = generator(
        cost={"constant_per_hour": draw.choice([0.0, 6.0]), "linear_per_mwh": draw.choice([20.0, 45.0])},
        start_costs=[
            {"after_hours_off": 0, "cost": 5.0},
            {"after_hours_off": draw.choice([1.5, 2]), "cost": 14.0},
            {"after_hours_off": draw.randint(3, 5), "cost": 40.0},
        ],
    )
    optional = {
        "min_up_hours": draw.choice([2, 2.5, 3]),
        "min_down_hours": draw.choice([1.5, 2, 3]),
        "ramp_up_mw_per_hour": draw.choice([0.5, 1.5]),
        "ramp_down_mw_per_hour": draw.choice([0.5, 1.5]),
    }
    unit |= {key: value for key, value in optional.items() if draw.random() < 0.6}
    request = job([draw.randint(-10, 90) for _ in range(HOURS)], unit)
    if draw.random() < 0.8:
        on = draw.random() < 0.6
        state: dict[str, Any] = {"on": on}
        if draw.random() < 0.7:
            state["hours_in_state"] = draw.choice([1, 1.5, 2, 4])
        if on and draw.random() < 0.7:
            state["output_mw"] = draw.choice(LEVELS_MW[1:])
        request["initial"] = {"mill-g1": state}
    if draw.random() < 0.6:
        first = draw.randrange(HOURS)
        fraction = draw.choice([0.0, 0.25, 0.75])
        outage = {"asset": "mill-g1", "kind": "forced", "from": at(first), "to": at(first + draw.randint(1, 2))}
        request["outages"] = [outage | {"available_fraction": fraction}]
    if draw.random() < 0.4:
        # Three quarters of the rated 2 MW.
        asked = {"threshold": {"fraction_of_rated": 0.75}, "hours": draw.randint(3, 6)}
        request["commitments"] = [owed("hours_at_least", {"assets": ["mill-g1"]}, **asked)]
    return request


def margin_by_replay(request: Job, outputs: tuple[float, ...]) -> float | None:
    """Return the margin of hourly outputs, None where they break a rule."""
    unit = request["fleet"]["assets"][0]
    most = available_mw(request)
    if any(p > limit for p, limit in zip(outputs, most, strict=True)):
        return None
    if any(sum(p >= 1.5 for p in outputs) < c["hours"] for c in request.get("commitments", [])):
        return None
    state = request["initial"].get("mill-g1", {"on": False})
    hours = state.get("hours_in_state", LONG)
    # One entry per stretch of the same state: on, its hours including those before the window, whether it is the first.
    stretches: list[tuple[bool, float]] = [(state["on"], hours)]
    cost, before = 0.0, state.get("output_mw", 1.0) if state["on"] else 0.0
    for t, p in enumerate(outputs):
        if not _ramp_holds(unit, before, p, free=most[t] < 2.0):
            return None
        was, lasted = stretches[-1]
        if was == (p > 0):
            stretches[-1] = (was, lasted + 1)
        else:
            needed = unit.get("min_up_hours" if was else "min_down_hours", 0)
            tripped = was and most[t] < 1.0
            # Hours the state had before the window count in whole hours only, and limits are rounded up to whole ones.
            if _whole_down(lasted) < _whole_up(needed) and not tripped:
                return None
            if p > 0:
                cost += [e["cost"] for e in unit["start_costs"] if e["after_hours_off"] <= lasted][-1]
            stretches.append((p > 0, 1))
        before = p
    prices = request["window"]["price_per_mwh"]
    running = sum(unit["cost"]["constant_per_hour"] for p in outputs if p > 0)
    earned = sum((price - unit["cost"]["linear_per_mwh"]) * p for price, p in zip(prices, outputs, strict=True))
    return float(earned - running - cost)


def available_mw(request: Job) -> list[float]:
    """Return the maximum output in each hour, outages applied."""
    most = [2.0] * HOURS
    for outage in request.get("outages", []):
        for t in range(HOURS):
            if outage["from"] <= at(t) < outage["to"]:
                most[t] = 2.0 * outage["available_fraction"]
    return most


def _ramp_holds(unit: dict[str, Any], before: float, now: float, *, free: bool) -> bool:
    """Tell whether a change of output is allowed; `free` where an outage lowers the later hour."""
    if free:
        return True
    up: float = unit.get("ramp_up_mw_per_hour", LONG)
    down: float = unit.get("ramp_down_mw_per_hour", LONG)
    if before == 0:
        return now <= max(1.0, up)
    if now == 0:
        return before <= max(1.0, down)
    return -down <= now - before <= up


def _whole_up(hours: float) -> int:
    return int(-(-hours // 1))


def _whole_down(hours: float) -> int:
    return int(hours // 1)
