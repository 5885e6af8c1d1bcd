"""Plain documents for the oracle's tests: hourly windows in UTC, small fleets with round numbers."""

from __future__ import annotations

from typing import Any

from tests.oracles.formulation import Answer, solve
from tests.oracles.formulation_clock import Job

Document = dict[str, Any]


def at(hour: int) -> str:
    """Return the start of an hour of the window as text; hour 24 and later are on the next day."""
    return f"2027-02-{9 + hour // 24:02d}T{hour % 24:02d}:00:00+00:00"


def store(asset: str = "wharf-b1", **changes: Any) -> Document:
    """Return a lossless 1 MW, 2 MWh store with `changes`."""
    plain = {"id": asset, "kind": "storage", "discharge_limit_mw": 1.0, "charge_limit_mw": 1.0}
    return plain | {"energy_capacity_mwh": 2.0, "charge_efficiency": 1.0, "discharge_efficiency": 1.0} | changes


def generator(asset: str = "mill-g1", **changes: Any) -> Document:
    """Return a generator of 1-2 MW that costs 40 per MWh, with `changes`."""
    plain = {"id": asset, "kind": "generator", "min_output_mw": 1.0, "max_output_mw": 2.0}
    return plain | {"cost": {"linear_per_mwh": 40.0}} | changes


def job(prices: list[float], *assets: Document, stored: float = 0.0, **members: Any) -> Job:
    """Return a job over hourly prices; stores start with `stored` and may end empty.

    `sites`, `fleet` (further members of it) and `products` go where they belong; the rest are members of the job.
    """
    stores = [asset["id"] for asset in assets if asset["kind"] == "storage"]
    window: Document = {"start": at(0), "interval": "PT1H", "timezone": "UTC", "currency": "EUR"}
    window["price_per_mwh"] = list(prices)
    if "products" in members:
        window["reserve_products"] = members.pop("products")
    fleet = {"assets": list(assets), "sites": members.pop("sites", [])} | members.pop("fleet", {})
    initial = {asset_id: {"stored_mwh": stored} for asset_id in stores} | members.pop("initial", {})
    targets = {asset_id: {"final_stored_mwh": 0.0} for asset_id in stores}
    return {"fleet": fleet, "window": window, "initial": initial, "targets": targets} | members


def product(direction: str, price: Any = 10.0, **changes: Any) -> Document:
    """Return a reserve product to be sustained for half an hour, named after its direction."""
    plain = {"id": direction, "direction": direction, "sustain_minutes": 30, "price_per_mw_per_hour": price}
    return plain | changes


def owed(kind: str, whom: Document | None = None, **changes: Any) -> Document:
    """Return a commitment, on the store where nobody else is named."""
    return {"id": "firm-1", "kind": kind, "applies_to": whom or {"assets": ["wharf-b1"]}} | changes


def best(request: Job) -> Answer:
    """Return the answer to a request that can be met, its bracket closed."""
    answer = solve(request, gap=1e-9)
    assert answer.outcome == "optimal"
    assert answer.margin is not None
    assert answer.bound is not None
    assert -1e-9 <= answer.bound - answer.margin <= 1e-6 * max(1.0, abs(answer.margin))
    return answer


def margin_of(request: Job) -> float:
    """Return the margin of a request that can be met."""
    margin = best(request).margin
    assert margin is not None
    return margin


def is_impossible(request: Job) -> bool:
    """Tell whether the oracle proves that a request cannot be met."""
    return solve(request).outcome == "infeasible"
