"""Draw small jobs of a store that runs at its limits or not at all, and tell their margin by replay, no model.

The store trades, holds reserve of one product, and owes one commitment of any kind. For given powers the best reserve
is the most that can be delivered in all of a block, as prices of reserve are not negative here.
"""

from __future__ import annotations

import itertools
import random
from typing import Any

from tests.oracles.formulation_clock import Job
from tests.oracles.plain_jobs import at, job, owed, product, store

HOURS = 6
LEVELS_MW = (-1.0, 0.0, 1.0)
# 22:00 to 04:00: two hours on the first day, four on the second; blocks count from midnight.
FIRST_HOUR = 22
DAYS = (0, 0, 1, 1, 1, 1)
KINDS = ("hours_at_most", "firm_delivery", "energy_at_least", "energy_at_most", "reserve_holding")


def on_off_store_job(seed: int) -> Job:
    """Return a job over six hours across midnight."""
    draw = random.Random(seed)
    lossy = draw.choice([1.0, 0.8])
    asset = store(
        min_charge_mw=1.0,
        min_discharge_mw=1.0,
        energy_capacity_mwh=draw.choice([2.5, 4.0]),
        charge_efficiency=lossy,
        discharge_efficiency=lossy,
    )
    sold = product(
        draw.choice(["up", "down", "symmetric"]),
        [draw.randint(0, 60) for _ in range(HOURS)],
        block_hours=draw.choice([None, 1, 2, 3]),
        sustain_minutes=draw.choice([30, 60, 90]),
    )
    prices = [float(draw.randint(-10, 90)) for _ in range(HOURS)]
    commitment = _commitment(draw, sold["id"])
    request = job(prices, asset, stored=draw.choice([0.5, 1.2, 2.3]), products=[sold], commitments=[commitment])
    request["window"]["start"] = at(FIRST_HOUR)
    if draw.random() < 0.4:
        outage = {"asset": "wharf-b1", "kind": "forced", "from": at(FIRST_HOUR + draw.randrange(HOURS)), "to": None}
        request["outages"] = [outage | {"available_fraction": 0.5}]
    if draw.random() < 0.4:
        request["counted_before"] = {"commitments": {"firm-1": 0.5}}
    return request


def _commitment(draw: random.Random, product_id: str) -> dict[str, Any]:
    commitment = owed(draw.choice(KINDS), each_day=draw.random() < 0.4)
    kind = commitment["kind"]
    if kind != "reserve_holding":
        commitment["direction"] = draw.choice(["discharge", "charge"])
    if kind == "hours_at_most":
        # 1.2 MW less its headroom is just what the store does: not above.
        asked = draw.choice([{"mw": 0.4}, {"fraction_of_rated": 0.0}, {"mw": 1.2, "headroom": 0.3}, {"mw": 1.2}])
        commitment["headroom_mw"] = asked.pop("headroom", 0.2)
        commitment |= {"threshold": asked, "hours": draw.randint(1, 2)}
        key = "shortfall_price_per_hour"
    elif kind.startswith("energy"):
        commitment["energy_mwh"] = draw.choice([0.7, 1.0, 1.5])
        key = "shortfall_price_per_mwh"
    elif kind == "firm_delivery":
        commitment["power_mw"] = [draw.choice([0.0, 0.0, 0.6, 1.0]) for _ in range(HOURS)]
        key = "shortfall_price_per_mwh"
    else:
        commitment |= {"product": product_id, "power_mw": [draw.choice([0.0, 0.0, 0.3]) for _ in range(HOURS)]}
        key = "shortfall_price_per_mw_per_hour"
    if kind in ("hours_at_most", "firm_delivery") and draw.random() < 0.4:
        first = FIRST_HOUR + draw.randrange(HOURS)
        commitment["excused"] = [{"from": at(first), "to": at(first + 1)}]
    if draw.random() < 0.5:
        commitment[key] = draw.choice([5.0, 60.0])
    return commitment


def margin_by_replay(request: Job, powers: tuple[float, ...]) -> float | None:
    """Return the margin of hourly powers with the best reserve beside them, None where a rule is broken."""
    asset = request["fleet"]["assets"][0]
    levels = [request["initial"]["wharf-b1"]["stored_mwh"]]
    most = [1.0] * HOURS
    for outage in request.get("outages", []):
        most = [0.5 if at(FIRST_HOUR + t) >= outage["from"] else 1.0 for t in range(HOURS)]
    for t, p in enumerate(powers):
        gain = -p * asset["charge_efficiency"] if p < 0 else -p / asset["discharge_efficiency"]
        levels.append(levels[-1] + gain)
        if not -1e-9 <= levels[-1] <= asset["energy_capacity_mwh"] + 1e-9 or abs(p) > most[t]:
            return None
    held = best_reserve(request, powers, levels, most)
    shortfall = shortfall_cost(request, powers, held)
    if shortfall is None:
        return None
    income = sum(mw * price for mw, price in zip(held, _product(request)["price_per_mw_per_hour"], strict=True))
    sold = sum(p * price for p, price in zip(powers, request["window"]["price_per_mwh"], strict=True))
    return float(sold + income - shortfall)


def _product(request: Job) -> dict[str, Any]:
    found: dict[str, Any] = request["window"]["reserve_products"][0]
    return found


def best_reserve(request: Job, powers: tuple[float, ...], levels: list[float], most: list[float]) -> list[float]:
    """Return the most that can be held in each hour, MW; `levels` has one entry more than there are hours."""
    asset, sold = request["fleet"]["assets"][0], _product(request)
    hours = sold["sustain_minutes"] / 60
    alone = []
    for t, p in enumerate(powers):
        low, high = min(levels[t : t + 2]), max(levels[t : t + 2])
        up = min(most[t] - p, low * asset["discharge_efficiency"] / hours)
        down = min(most[t] + p, (asset["energy_capacity_mwh"] - high) / asset["charge_efficiency"] / hours)
        alone.append({"up": up, "down": down, "symmetric": min(up, down)}[sold["direction"]])
    block = sold["block_hours"] or 1
    keys = [(DAYS[t], (FIRST_HOUR + t) % 24 // block) for t in range(HOURS)]
    return [min(mw for mw, other in zip(alone, keys, strict=True) if other == key) for key in keys]


def shortfall_cost(request: Job, powers: tuple[float, ...], held: list[float]) -> float | None:
    """Return what falling short (or exceeding) costs, None where the commitment is binding and not met."""
    commitment = request["commitments"][0]
    excused = {
        t for t in range(HOURS) for s in commitment.get("excused", []) if s["from"] <= at(FIRST_HOUR + t) < s["to"]
    }
    credit = request.get("counted_before", {"commitments": {"firm-1": 0.0}})["commitments"]["firm-1"]
    price = next((commitment[key] for key in commitment if key.startswith("shortfall_price")), None)
    sign = -1 if commitment.get("direction") == "charge" else 1
    cost = 0.0
    for _, row in itertools.groupby(range(HOURS), key=lambda t: DAYS[t] if commitment["each_day"] else 0):
        missing = _missing(commitment, [t for t in row if t not in excused], [sign * p for p in powers], held, credit)
        credit = 0.0
        if missing > 1e-9 and price is None:
            return None
        cost += missing * (price or 0.0)
    return cost


def _missing(
    commitment: dict[str, Any], hours: list[int], power: list[float], held: list[float], credit: float
) -> float:
    """Return by how much one row is missed, in the unit it is priced in."""
    kind = commitment["kind"]
    if kind == "hours_at_most":
        kept_below: float = commitment["threshold"].get("mw", 0.0) - commitment["headroom_mw"]
        above = sum(power[t] > max(0.0, kept_below) + 1e-6 for t in hours)
        hours_allowed: float = commitment["hours"]
        return max(0.0, above + credit - hours_allowed)
    delivered = sum(max(0.0, power[t]) for t in hours)
    owed_mwh: float = commitment.get("energy_mwh", 0.0)
    if kind == "energy_at_least":
        return max(0.0, owed_mwh - delivered - credit)
    if kind == "energy_at_most":
        return max(0.0, delivered + credit - owed_mwh)
    got = held if kind == "reserve_holding" else [max(0.0, p) for p in power]
    # What is firm is owed hour by hour: nothing counted before makes up for it.
    due: list[float] = commitment["power_mw"]
    short: float = sum(max(0.0, due[t] - got[t]) for t in hours)
    return short
