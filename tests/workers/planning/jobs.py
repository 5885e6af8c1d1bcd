"""Small jobs to plan in tests: plain documents, and what the planner makes of them."""

from datetime import UTC, datetime
from typing import Any

from schemas.diagnosis import Diagnosis
from schemas.job import ScheduleJob
from schemas.reading import read_job
from schemas.schedule import Schedule
from workers.planning.limits import Limits
from workers.planning.plan import plan

Document = dict[str, Any]

NOW = datetime(2027, 2, 8, 12, 0, tzinfo=UTC)


def store(asset: str = "quay-b1", **changes: Any) -> Document:
    """Return a lossless 1 MW, 2 MWh store with `changes`."""
    plain = {"id": asset, "kind": "storage", "discharge_limit_mw": 1.0, "charge_limit_mw": 1.0}
    return plain | {"energy_capacity_mwh": 2.0, "charge_efficiency": 1.0, "discharge_efficiency": 1.0} | changes


def generator(asset: str = "quay-g1", **changes: Any) -> Document:
    """Return a generator that runs between 1 and 4 MW at no cost."""
    return {"id": asset, "kind": "generator", "min_output_mw": 1.0, "max_output_mw": 4.0} | changes


def renewable(asset: str = "quay-pv", **changes: Any) -> Document:
    """Return a renewable that can be curtailed."""
    return {"id": asset, "kind": "renewable"} | changes


def flexible_load(asset: str = "quay-pumps", **changes: Any) -> Document:
    """Return a load that draws up to 2 MW where its needs allow."""
    return {"id": asset, "kind": "flexible_load", "draw_limit_mw": 2.0} | changes


def fixed_load(asset: str = "quay-mill", **changes: Any) -> Document:
    """Return a fixed load."""
    return {"id": asset, "kind": "fixed_load"} | changes


def product(name: str = "up-60", **changes: Any) -> Document:
    """Return a reserve product that is called upwards for an hour and pays nothing."""
    return {"id": name, "direction": "up", "sustain_minutes": 60.0, "price_per_mw_per_hour": 0.0} | changes


def outage(asset: str, first: int, end: int, left: float = 0.0) -> Document:
    """Return an outage over the hours from `first` up to, not including, `end` of the window's day."""
    begins, ends = f"2027-02-09T{first:02d}:00:00Z", f"2027-02-09T{end:02d}:00:00Z"
    return {"asset": asset, "kind": "forced", "from": begins, "to": ends, "available_fraction": left}


def hours(whom: Document, needed: float, threshold_mw: float, **changes: Any) -> Document:
    """Return a commitment of so many hours at a threshold."""
    return {
        "id": "evening",
        "kind": "hours_at_least",
        "applies_to": whom,
        "threshold": {"mw": threshold_mw},
        "hours": needed,
    } | changes


def job(prices: list[float], *assets: Document, stored: float = 0.0, final: float = 0.0, **members: Any) -> Document:
    """Return a job over hourly prices; stores start with `stored` and end with at least `final`, MWh."""
    stores = [asset["id"] for asset in assets if asset["kind"] == "storage"]
    sites = members.pop("sites", [])
    fleet = {"assets": list(assets), "sites": sites} | members.pop("fleet", {})
    window = {
        "start": "2027-02-09T00:00:00+00:00",
        "interval": "PT60M",
        "timezone": "UTC",
        "currency": "EUR",
        "price_per_mwh": prices,
        "price_basis": "forecast",
    } | members.pop("window", {})
    return {
        "fleet": fleet,
        "window": {name: value for name, value in window.items() if value is not None},
        "initial": {asset: {"stored_mwh": stored} for asset in stores},
        "targets": {asset: {"final_stored_mwh": final} for asset in stores},
        "relative_gap": 1e-7,
    } | members


def answer(document: Document, threads: int = 1) -> Any:
    """Plan a document and return whatever the planner answers."""
    read = read_job(document)
    return plan(read, Limits.of(read, NOW, threads=threads))


def planned(document: Document) -> Schedule:
    """Plan a document that has a schedule; the audit has passed it, and its bound is above its margin."""
    found = answer(document)
    assert isinstance(found, Schedule), found
    assert found.outcome in {"optimal", "feasible"}
    assert found.verification.violations == []
    assert found.margin_bound is not None
    assert found.margin_bound >= found.margin
    return found


def refused(document: Document) -> Diagnosis:
    """Plan a document that has no schedule."""
    found = answer(document)
    assert isinstance(found, Diagnosis), found
    assert found.conflicts
    assert found.cautions
    return found


def power_of(schedule: Schedule, asset: str) -> list[float]:
    """Return the set points of an asset, MW."""
    return next(entry.power_mw for entry in schedule.assets if entry.id == asset)


def on_of(schedule: Schedule, asset: str) -> list[bool]:
    """Return whether a generator is on, by interval."""
    is_on = next(entry.on for entry in schedule.assets if entry.id == asset)
    assert is_on is not None
    return is_on


def reserve_of(schedule: Schedule, asset: str, name: str = "up-60") -> list[float]:
    """Return what an asset holds of a reserve product, MW."""
    return next(entry.reserve_mw for entry in schedule.assets if entry.id == asset)[name]


def indexed(document: Document) -> ScheduleJob:
    """Read a document as a job to schedule."""
    read = read_job(document)
    assert isinstance(read, ScheduleJob)
    return read
