"""Invent requests that every tool of the benchmark can take: stores, one price, hours of firm discharge.

    hours <= share * D * d / (d + c),  d = usable * eta_d / (P/2),  c = usable / (eta_c * P_c)      (1)
    hours <= share * cycles * capacity / (P/2)                                                      (2)

(1) is what a store can hold half its rated power for in a day of D hours while it fills up again in between; a share
below 1 leaves room for the start, for the connection and for choosing the hours by price.
"""

from math import floor
from typing import Any

import numpy as np

Request = dict[str, Any]

RELATIVE_GAP = 1e-3
TIME_LIMIT_SECONDS = 120.0
QUARTER_HOURS = 96
COUPLED_SHARE = 0.4
"""Limit of the fleet's connection, as a share of the sum of its stores' powers."""

SITE_SHARE = 0.6
STORES_PER_SITE = 5
COMMITTED_SHARE = 0.8
FRACTION_OF_RATED = 0.5
MOST_OF_WHAT_IS_POSSIBLE = 0.6


def uncoupled(count: int, *, seed: int, intervals: int = QUARTER_HOURS) -> Request:
    """Invent stores that nothing couples: no site, no limit."""
    random = np.random.default_rng(seed)
    assets = [_store(random, number) for number in range(count)]
    price = _price(random, intervals)
    return {
        "task": "schedule",
        "fleet": {"sites": [], "assets": assets},
        "window": {
            "start": "2027-01-19T00:00:00+00:00",
            "interval": "PT15M",
            "timezone": "Europe/Lisbon",
            "currency": "EUR",
            "price_per_mwh": price,
            "price_basis": "forecast",
        },
        "initial": {asset["id"]: {"stored_mwh": _start(random, asset)} for asset in assets},
        "commitments": list(_commitments(random, assets, intervals / 4)),
        "relative_gap": RELATIVE_GAP,
        "time_limit_seconds": TIME_LIMIT_SECONDS,
    }


def coupled(count: int, *, seed: int, intervals: int = QUARTER_HOURS) -> Request:
    """Invent stores that share one connection, too small for all of them at once."""
    request = uncoupled(count, seed=seed, intervals=intervals)
    request["fleet"] |= _limits(request["fleet"]["assets"], COUPLED_SHARE)
    return request


def coupled_with_sites(count: int, *, seed: int, intervals: int = QUARTER_HOURS) -> Request:
    """Invent stores at sites with connections of their own, under the fleet's."""
    request = coupled(count, seed=seed, intervals=intervals)
    fleet = request["fleet"]
    for first in range(0, count, STORES_PER_SITE):
        members = fleet["assets"][first : first + STORES_PER_SITE]
        site = f"site-{first // STORES_PER_SITE}"
        fleet["sites"].append({"id": site} | _limits(members, SITE_SHARE))
        for asset in members:
            asset["site"] = site
    return request


def _limits(assets: list[Request], share: float) -> Request:
    return {
        "export_limit_mw": round(share * sum(asset["discharge_limit_mw"] for asset in assets), 3),
        "import_limit_mw": round(share * sum(asset["charge_limit_mw"] for asset in assets), 3),
    }


def _store(random: np.random.Generator, number: int) -> Request:
    discharge_mw = round(float(random.uniform(1.0, 10.0)), 2)
    capacity_mwh = round(discharge_mw * float(random.uniform(1.0, 4.0)), 2)
    return {
        "id": f"b{number}",
        "kind": "storage",
        "discharge_limit_mw": discharge_mw,
        "charge_limit_mw": round(discharge_mw * float(random.uniform(0.8, 1.0)), 2),
        "energy_capacity_mwh": capacity_mwh,
        "min_stored_mwh": round(0.05 * capacity_mwh, 3),
        "max_stored_mwh": capacity_mwh,
        "charge_efficiency": round(float(random.uniform(0.90, 0.97)), 3),
        "discharge_efficiency": round(float(random.uniform(0.90, 0.97)), 3),
        "wear_cost_per_mwh": round(float(random.uniform(1.0, 6.0)), 2),
        "max_cycles_per_day": round(float(random.uniform(1.5, 3.0)), 1) if random.random() < 0.5 else None,
    }


def _start(random: np.random.Generator, asset: Request) -> float:
    capacity_mwh: float = asset["energy_capacity_mwh"]
    return round(float(random.uniform(0.3, 0.7)) * capacity_mwh, 3)


def _price(random: np.random.Generator, intervals: int) -> list[float]:
    """Draw a day with a morning and an evening peak, per MWh; above 0 throughout."""
    hour = np.arange(intervals) / 4
    level = 55.0 + 45.0 * np.exp(-(((hour - 8.0) / 1.8) ** 2)) + 70.0 * np.exp(-(((hour - 19.0) / 2.2) ** 2))
    noise = random.normal(0.0, 6.0, intervals)
    return [round(price, 2) for price in np.maximum(level + noise, 5.0).tolist()]


def _commitments(random: np.random.Generator, assets: list[Request], day_hours: float) -> list[Request]:
    count = len(assets)
    committed = sorted(random.permutation(count)[: max(1, round(COMMITTED_SHARE * count))].tolist())
    found = []
    for number in committed:
        share = float(random.uniform(0.3, MOST_OF_WHAT_IS_POSSIBLE))
        hours = floor(4 * share * _possible_hours(assets[number], day_hours)) / 4
        found.append(
            {
                "id": f"firm-{number}",
                "kind": "hours_at_least",
                "applies_to": {"assets": [assets[number]["id"]]},
                "threshold": {"fraction_of_rated": FRACTION_OF_RATED},
                "hours": max(hours, 0.25),
            }
        )
    return found


def _possible_hours(asset: Request, day_hours: float) -> float:
    usable = asset["max_stored_mwh"] - asset["min_stored_mwh"]
    asked_mw = FRACTION_OF_RATED * asset["discharge_limit_mw"]
    emptying = usable * asset["discharge_efficiency"] / asked_mw
    filling = usable / (asset["charge_efficiency"] * asset["charge_limit_mw"])
    possible = day_hours * emptying / (emptying + filling)
    cycles = asset["max_cycles_per_day"]
    if cycles is None:
        return float(possible)
    return float(min(possible, cycles * asset["energy_capacity_mwh"] / asked_mw))
