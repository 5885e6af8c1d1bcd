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


def indexed(document: Document) -> ScheduleJob:
    """Read a document as a job to schedule."""
    read = read_job(document)
    assert isinstance(read, ScheduleJob)
    return read
