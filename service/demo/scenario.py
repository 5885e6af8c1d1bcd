"""The Pellow Bay co-operative: an invented fleet, an invented day, and what was promised for it.

Prices, plant and promises are made up; only their shape is that of a spring weekday with much sun. Everything is built
from fixed numbers, so two runs ask the same question.
"""

from math import exp
from typing import Any

Document = dict[str, Any]

INTERVALS = 96
TIME_LIMIT_SECONDS = 30
DAY = "2027-03-16"
DAY_BEFORE = "2027-03-15"


def evening_request() -> Document:
    """Return the day ahead as a job: eight stores at three sites and one on its own, five commitments."""
    return {
        "task": "schedule",
        "label": "day ahead",
        "fleet": fleet(),
        "window": window(),
        "initial": {
            "cs-b1": {"stored_mwh": 2.0},
            "cs-b2": {"state_of_charge_percent": 35},
            "hb-b1": {"stored_mwh": 9.0},
            "hb-b2": {"stored_mwh": 1.5},
            "hb-b3": {"stored_mwh": 1.0},
            "lw-b1": {"stored_mwh": 6.0},
            "lw-b2": {"stored_mwh": 0.8},
            "ferry": {"stored_mwh": 1.2},
        },
        "targets": {"hb-b1": {"final_stored_mwh": 6.0, "final_value_per_mwh": 40.0}},
        "forecasts": {"cs-cooling": _cooling_mw(), "lw-crusher": _crusher_mw()},
        "outages": [
            {"asset": "cs-b2", "kind": "planned", "from": _at("06:50"), "to": _at("09:00")},
            {"asset": "lw-b1", "kind": "planned", "from": _at("11:00"), "to": _at("13:00")},
        ],
        "commitments": commitments(),
        "time_limit_seconds": TIME_LIMIT_SECONDS,
    }


def tripped_request() -> Document:
    """Return the same day after a trip: `lw-b1` went out last evening and is expected back at 09:00.

    The two hours of work on it before noon were planned when it could fill in the night; its 8 h of the evening are
    still due.
    """
    request = evening_request()
    request["label"] = "day ahead, lw-b1 tripped"
    tripped = {"asset": "lw-b1", "kind": "forced", "from": _at("21:40", DAY_BEFORE), "to": _at("09:00")}
    request["outages"].append(tripped)
    return request


def fleet() -> Document:
    """Return what stands on the ground: a fleet as the contract writes it."""
    return {
        "name": "Pellow Bay co-operative",
        "sites": [
            {"id": "cold-store", "export_limit_mw": 5.0, "import_limit_mw": 6.0, "import_fee_per_mwh": 3.5},
            {"id": "harbour", "export_limit_mw": 8.0, "import_limit_mw": 7.0, "export_fee_per_mwh": 0.6},
            {"id": "lime-works", "export_limit_mw": 4.0, "import_limit_mw": 5.0, "peak_import_charge_per_mw": 45.0},
        ],
        "assets": [
            _store("cs-b1", "cold-store", 4.0, 8.0, 0.95, min_stored_mwh=0.4, wear_cost_per_mwh=3.0),
            _store("cs-b2", "cold-store", 1.5, 6.0, 0.91, min_stored_mwh=0.6, wear_cost_per_mwh=5.0),
            {"id": "cs-cooling", "kind": "fixed_load", "site": "cold-store"},
            _store("hb-b1", "harbour", 6.0, 24.0, 0.94, min_stored_mwh=1.2, wear_cost_per_mwh=4.0),
            _store("hb-b2", "harbour", 2.5, 5.0, 0.965, wear_cost_per_mwh=2.5, max_cycles_per_day=1.5),
            _store("hb-b3", "harbour", 0.8, 2.4, 0.93, min_discharge_mw=0.2, min_charge_mw=0.2, wear_cost_per_mwh=6.0),
            _store("lw-b1", "lime-works", 3.0, 18.0, 0.87, standby_load_mw=0.06, wear_cost_per_mwh=0.5),
            _store("lw-b2", "lime-works", 1.0, 2.0, 0.94, wear_cost_per_mwh=3.5),
            {"id": "lw-crusher", "kind": "fixed_load", "site": "lime-works"},
            _store("ferry", None, 1.2, 2.8, 0.92, wear_cost_per_mwh=8.0, ramp_mw_per_hour=2.4),
        ],
    }


def commitments() -> list[Document]:
    """Return what was promised for the evening; the last two cost a price where they fall short, the rest bind."""
    return [
        {
            "id": "long-evening",
            "kind": "hours_at_least",
            "applies_to": {"assets": ["lw-b1"]},
            "threshold": {"fraction_of_rated": 0.5},
            "hours": 8,
            "from": _at("14:00"),
            "min_block_hours": 2,
        },
        {
            "id": "evening-peak",
            "kind": "hours_at_least",
            "applies_to": {"assets": ["cs-b1", "hb-b1"]},
            "threshold": {"fraction_of_rated": 0.5},
            "hours": 2.5,
            "each_day": True,
            "between": ["17:00", "22:00"],
            "min_block_hours": 1,
        },
        {
            "id": "harbour-feed",
            "kind": "hours_at_least",
            "applies_to": {"site": "harbour"},
            "threshold": {"mw": 5.0},
            "headroom_mw": 0.25,
            "hours": 3,
            "from": _at("17:00"),
            "to": _at("22:00"),
        },
        {
            "id": "small-ones",
            "kind": "hours_at_least",
            "applies_to": {"group": ["cs-b2", "hb-b2", "ferry"]},
            "threshold": {"mw": 3.5},
            "hours": 2,
            "from": _at("17:00"),
            "to": _at("21:00"),
            "shortfall_price_per_hour": 120.0,
        },
        {
            "id": "late-support",
            "kind": "hours_at_least",
            "applies_to": {"assets": ["lw-b2"]},
            "threshold": {"fraction_of_rated": 0.8},
            "hours": 3,
            "from": _at("18:00"),
            "to": _at("22:00"),
            "min_block_hours": 1,
            "shortfall_price_per_hour": 30.0,
        },
    ]


def window() -> Document:
    """Return the market's day: quarter-hours with two peaks, and a noon at which power is given away."""
    return {
        "start": _at("00:00"),
        "interval": "PT15M",
        "timezone": "Europe/Lisbon",
        "currency": "EUR",
        "price_per_mwh": prices_per_mwh(),
        "price_basis": "forecast",
    }


def prices_per_mwh() -> list[float]:
    """Return an invented price for each quarter-hour of the day, EUR/MWh.

    Within an hour prices lean the way that is usual where plant follows the hour: falling while the sun rises, rising
    while it sets (common practice, no source).
    """
    prices = []
    for quarter in range(INTERVALS):
        hour = (quarter + 0.5) / 4
        trend = 58 + 62 * _bell(hour, 7.8, 1.3) + 118 * _bell(hour, 19.4, 1.9) - 74 * _bell(hour, 13.2, 2.4)
        lean = (quarter % 4 - 1.5) * (-1.2 if 7 <= hour < 13 else 0.9)
        prices.append(round(trend + lean - 8 * _bell(hour, 3.5, 2.0), 2))
    return prices


def _store(
    name: str, site: str | None, power_mw: float, capacity_mwh: float, efficiency: float, **more: Any
) -> Document:
    return {
        "id": name,
        "kind": "storage",
        **({} if site is None else {"site": site}),
        "discharge_limit_mw": power_mw,
        "charge_limit_mw": power_mw,
        "energy_capacity_mwh": capacity_mwh,
        "charge_efficiency": efficiency,
        "discharge_efficiency": efficiency,
        **more,
    }


def _cooling_mw() -> list[float]:
    return [round(0.7 + 0.6 * _bell((quarter + 0.5) / 4, 15.0, 4.0), 3) for quarter in range(INTERVALS)]


def _crusher_mw() -> list[float]:
    return [1.4 if 6 * 4 <= quarter < 17 * 4 else 0.2 for quarter in range(INTERVALS)]


def _bell(hour: float, middle: float, width: float) -> float:
    return exp(-(((hour - middle) / width) ** 2) / 2)


def _at(clock: str, day: str = DAY) -> str:
    """Write a time of a day; Lisbon keeps UTC until the last Sunday of March."""
    return f"{day}T{clock}:00+00:00"
