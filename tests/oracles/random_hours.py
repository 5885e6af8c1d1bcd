"""Generate jobs of one store that must deliver for nearly as long, or for longer, than it can.

The same seed gives the same job. Names, prices and sizes are invented. Nothing but energy, limits (some behind a
connection with a load beside it) and hours matters in a plain one; in a particular one the store also has least powers,
runs, rests, a ramp or blocks.
"""

from __future__ import annotations

import random
from typing import Any

from tests.oracles.formulation_clock import Job

ASSET = "fen-b1"


def at(hour: float) -> str:
    """Return a time of the window, hours after its start, as text."""
    day, minutes = divmod(round(hour * 60), 24 * 60)
    return f"2027-02-{9 + day:02d}T{minutes // 60:02d}:{minutes % 60:02d}:00+00:00"


def tight_request(seed: int, *, is_particular: bool = False) -> Job:
    """Return a job over 8 to 14 intervals of half an hour, some of them over two days."""
    draw = random.Random(f"hours-{seed}")
    count = draw.randint(8, 14)
    first = draw.choice([0.0, 0.0, 24 - count / 4])
    store = _store(draw)
    if is_particular:
        store |= _particulars(draw, store)
    asked = _commitments(draw, first, count, is_particular)
    sites, loads = _site(draw, count) if draw.random() < 0.3 else ([], {})
    if sites:
        store["site"] = sites[0]["id"]
    low, high = store.get("min_stored_mwh", 0.0), store.get("max_stored_mwh", store["energy_capacity_mwh"])
    starts = (0.0, store["energy_capacity_mwh"]) if draw.random() < 0.2 else (low, high)
    return {
        "fleet": {
            "assets": [store, *({"id": load, "kind": "fixed_load", "site": "fen"} for load in loads)],
            "sites": sites,
        },
        "forecasts": loads,
        "window": {
            "start": at(first),
            "interval": "PT30M",
            "timezone": "UTC",
            "currency": "EUR",
            "price_per_mwh": [round(draw.uniform(-20, 120), 2) for _ in range(count)],
            "price_basis": "forecast",
        },
        "initial": {ASSET: {"stored_mwh": round(draw.uniform(*starts), 2)}},
        "targets": {ASSET: {"final_stored_mwh": round(draw.uniform(low, high), 2)}},
        "outages": _outages(draw, first, count),
        "commitments": asked,
        "counted_before": {"commitments": {asked[0]["id"]: {ASSET: 0.5}}} if draw.random() < 0.2 else {},
    }


def _store(draw: random.Random) -> dict[str, Any]:
    store: dict[str, Any] = {
        "id": ASSET,
        "kind": "storage",
        "discharge_limit_mw": draw.choice([1.0, 1.5, 2.0]),
        "charge_limit_mw": draw.choice([0.0, 0.5, 1.0, 1.0, 2.0]),
        "energy_capacity_mwh": draw.choice([1.0, 2.0, 3.0]),
        "charge_efficiency": draw.choice([0.8, 0.9, 1.0]),
        "discharge_efficiency": draw.choice([0.9, 0.95, 1.0]),
    }
    if draw.random() < 0.4:
        store["min_stored_mwh"] = 0.25
    if draw.random() < 0.3:
        store["max_stored_mwh"] = store["energy_capacity_mwh"] - 0.25
    if draw.random() < 0.3:
        store["self_discharge_per_hour"] = 0.02
    if draw.random() < 0.3:
        store["max_cycles_per_day"] = draw.choice([0.5, 1.0, 1.5])
    return store


def _particulars(draw: random.Random, store: dict[str, Any]) -> dict[str, Any]:
    power = store["discharge_limit_mw"]
    least = {"min_discharge_mw": round(0.3 * power, 3), "min_charge_mw": round(0.3 * store["charge_limit_mw"], 3)}
    rules = {"min_run_hours": 1.0, "min_rest_hours": 0.5, "max_starts_per_day": 3}
    chosen = {name: value for name, value in rules.items() if draw.random() < 0.5}
    if chosen or draw.random() < 0.5:
        chosen |= {name: value for name, value in least.items() if value}
    if draw.random() < 0.5:
        chosen["ramp_mw_per_hour"] = round(2 * power, 3)
    return chosen


def _site(draw: random.Random, count: int) -> tuple[list[dict[str, Any]], dict[str, list[float]]]:
    """Put the store behind a connection, sometimes beside a load."""
    site = {"id": "fen", "export_limit_mw": draw.choice([0.5, 0.8, 1.0]), "import_limit_mw": draw.choice([0.5, 1.0])}
    if draw.random() < 0.5:
        return [site], {}
    return [site], {"fen-mill": [round(draw.uniform(0.0, 0.45), 2) for _ in range(count)]}


def _outages(draw: random.Random, first: float, count: int) -> list[dict[str, Any]]:
    if draw.random() < 0.5:
        return []
    begins = draw.randint(0, count - 2)
    ends = draw.randint(begins + 1, min(count, begins + 4))
    return [
        {
            "asset": ASSET,
            "kind": draw.choice(["forced", "planned"]),
            "from": at(first + begins / 2),
            "to": at(first + ends / 2),
            "available_fraction": draw.choice([0.0, 0.0, 0.5, 0.8]),
        }
    ]


def _commitments(draw: random.Random, first: float, count: int, is_particular: bool) -> list[dict[str, Any]]:
    """Ask once, day by day, or in two stretches one after the other; sometimes with an excuse."""
    middle = draw.randint(3, count - 3)
    stretches = draw.choice([[(0, count)], [(0, count)], [(2, count)], [(0, middle), (middle, count)]])
    found = []
    for number, (begins, ends) in enumerate(stretches):
        asked: dict[str, Any] = {
            "id": f"firm-{number}",
            "kind": "hours_at_least",
            "applies_to": {"assets": [ASSET]},
            "threshold": draw.choice([{"fraction_of_rated": 0.5}, {"mw": 0.4}, {"mw": 0.8}]),
            "hours": 0.5 * draw.randint(1, max(1, round((ends - begins) * 0.7))),
            "from": at(first + begins / 2),
            "to": at(first + ends / 2),
        }
        if len(stretches) == 1 and draw.random() < 0.3:
            asked["each_day"] = True
        if draw.random() < 0.25:
            asked["excused"] = [{"from": at(first + begins / 2 + 0.5), "to": at(first + begins / 2 + 1)}]
        if is_particular and draw.random() < 0.5:
            asked["min_block_hours"] = 1.0
        found.append(asked)
    return found
