"""Requests to try containers with, of an invented fleet; any Python builds them."""

import json
from typing import Any


def small(**members: Any) -> bytes:
    """Give a request for one store and two firm hours that takes milliseconds to plan."""
    return _request(stores=1, intervals=4, **members)


def long(seconds: float, **members: Any) -> bytes:
    """Give a request whose solver works for as long as it is let: many stores, one connection, prices round zero."""
    return _request(stores=20, intervals=96, time_limit_seconds=seconds, relative_gap=1e-7, **members)


def _request(stores: int, intervals: int, **members: Any) -> bytes:
    is_small = stores == 1
    assets = [
        {
            "id": f"quay-b{number}",
            "kind": "storage",
            "discharge_limit_mw": 2.0,
            "charge_limit_mw": 2.0,
            "min_discharge_mw": 0.0 if is_small else 0.5 + 0.03 * number,
            "min_charge_mw": 0.0 if is_small else 0.5 + 0.02 * number,
            "energy_capacity_mwh": 4.0 + 0.1 * number,
            "charge_efficiency": 0.95 - 0.002 * number,
            "discharge_efficiency": 0.95,
            "wear_cost_per_mwh": 1.0 + 0.1 * number,
        }
        for number in range(stores)
    ]
    commitment = {
        "id": "firm-evening",
        "kind": "hours_at_least",
        "applies_to": {"assets": ["quay-b0"]},
        "threshold": {"fraction_of_rated": 0.5},
        "hours": 2,
    }
    document = {
        "fleet": {"assets": assets} | ({} if is_small else {"export_limit_mw": 16.0, "import_limit_mw": 16.0}),
        "window": {
            "start": "2027-03-14T00:00:00+00:00",
            "interval": "PT60M" if is_small else "PT15M",
            "timezone": "Europe/Lisbon",
            "currency": "EUR",
            "price_per_mwh": [round(((7 * step) % 11 - 5) * 3.1 - 4.0, 2) for step in range(intervals)],
            "price_basis": "forecast",
        },
        "initial": {asset["id"]: {"stored_mwh": 2.5} for asset in assets},
        "commitments": [commitment] if is_small else [],
        **members,
    }
    return json.dumps(document).encode()
