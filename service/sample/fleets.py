"""Fleets of the sample, as the contract writes them: small, invented, each with one thing to show."""

from typing import Any

Document = dict[str, Any]

MANY = 20


def quay() -> Document:
    """Return two stores behind one connection: most days can be planned for them."""
    return {
        "name": "Sample quay",
        "note": "as built",
        "sites": [{"id": "quay", "export_limit_mw": 2.5, "import_limit_mw": 2.5, "import_fee_per_mwh": 3.0}],
        "assets": [
            _store("quay-b1", 2.0, 4.0, site="quay", wear_cost_per_mwh=3.0),
            _store("quay-b2", 1.0, 6.0, site="quay", wear_cost_per_mwh=1.5, max_cycles_per_day=1.0),
        ],
    }


def kiln() -> Document:
    """Return a store that fills slowly: what it is asked for in `trials` it cannot hold."""
    return {
        "name": "Sample kiln",
        "assets": [{**_store("kiln-b1", 2.0, 6.0, wear_cost_per_mwh=2.0), "charge_limit_mw": 0.1}],
    }


def twenty() -> Document:
    """Return many stores that may run or rest but nothing between, behind a connection too narrow for all."""
    stores = [
        _store(
            f"cell-{number:02}",
            2.0,
            round(4.0 + 0.1 * number, 1),
            min_discharge_mw=round(0.5 + 0.03 * number, 2),
            min_charge_mw=round(0.5 + 0.02 * number, 2),
            wear_cost_per_mwh=round(1.0 + 0.1 * number, 1),
        )
        for number in range(1, MANY + 1)
    ]
    return {"name": "Sample twenty", "export_limit_mw": 16.0, "import_limit_mw": 16.0, "assets": stores}


def _store(name: str, power_mw: float, capacity_mwh: float, **more: Any) -> Document:
    return {
        "id": name,
        "kind": "storage",
        "discharge_limit_mw": power_mw,
        "charge_limit_mw": power_mw,
        "energy_capacity_mwh": capacity_mwh,
        "charge_efficiency": 0.95,
        "discharge_efficiency": 0.95,
        **more,
    }
