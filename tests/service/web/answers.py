"""Answers as a worker would leave them, made by hand: a schedule over the hour that comes twice, and a diagnosis."""

from datetime import UTC, datetime, timedelta
from typing import Any
from zoneinfo import ZoneInfo

from schemas.cautions import CAUTIONS
from schemas.diagnosis import Conflict, Diagnosis, Member, NearestSchedule, Shortfall
from schemas.schedule import (
    AssetSchedule,
    CommitmentResult,
    FleetSchedule,
    MeterSchedule,
    Provenance,
    Schedule,
    Totals,
    Undecided,
    Verification,
)

Json = dict[str, Any]
START = datetime(2027, 10, 30, 23, 0, tzinfo=UTC)
INTERVALS = 4
ZONE = "Europe/Lisbon"


def job() -> Json:
    """Give a request whose window holds the hour that comes twice, with a store at a site and one without."""
    store = {
        "kind": "storage",
        "discharge_limit_mw": 4.0,
        "charge_limit_mw": 4.0,
        "energy_capacity_mwh": 8.0,
        "charge_efficiency": 0.95,
        "discharge_efficiency": 0.95,
    }
    return {
        "label": "day ahead",
        "fleet": {
            "name": "Pellow Bay co-operative",
            "sites": [{"id": "cold-store", "export_limit_mw": 5.0}],
            "assets": [{"id": "cs-b1", "site": "cold-store", **store}, {"id": "quay-b2", **store}],
        },
        "window": {
            "start": "2027-10-31T00:00:00+01:00",
            "interval": "PT60M",
            "timezone": ZONE,
            "currency": "EUR",
            "price_per_mwh": [50.0, 60.0, -1.5, 80.0],
            "price_basis": "forecast",
        },
        "initial": {"cs-b1": {"stored_mwh": 4.0}, "quay-b2": {"stored_mwh": 4.0}},
    }


def schedule(violated: bool = False) -> Schedule:
    local = [(START + timedelta(hours=hour)).astimezone(ZoneInfo(ZONE)) for hour in range(INTERVALS)]
    return Schedule(
        outcome="violated" if violated else "optimal",
        method="milp",
        currency="EUR",
        price_basis="forecast",
        margin=616.57,
        margin_bound=616.6,
        relative_gap=0.00005,
        start=local[0],
        interval=timedelta(hours=1),
        timezone=ZONE,
        interval_starts=local,
        totals=Totals(sales=616.57),
        assets=[
            AssetSchedule(id="cs-b1", power_mw=[0.1 + 0.2, -1e-7, 4.0, 0.0], stored_mwh=[4.0, 3.5, 1e-16, 2.0]),
            AssetSchedule(id="quay-b2", power_mw=[0.0, 0.0, 1.0, 2.0], on=[False, False, True, True]),
        ],
        sites=[MeterSchedule(id="cold-store", power_mw=[0.3, 0.0, 4.0, 0.0])],
        fleet=FleetSchedule(power_mw=[0.3, 0.0, 5.0, 2.0]),
        commitments=[CommitmentResult(id="firm-evening", required_hours=2.0, delivered_hours=2.0, met=True)],
        verification=Verification(checks=12, largest_residual=0.0),
        provenance=Provenance(
            request_sha256="0" * 64, versions={}, seed=0, threads=1, why_method="by hand", solver_seconds=0.0
        ),
        cautions=list(CAUTIONS),
    )


def schedule_document(violated: bool = False) -> Json:
    return schedule(violated).model_dump(mode="json", by_alias=True)


def nearest_schedule() -> NearestSchedule:
    missing = Shortfall(pointer="/commitments/0", text="firm-evening misses 1 h", amount=1.0, unit="h")
    return NearestSchedule(**dict(schedule()), shortfalls=[missing])


def diagnosis_document(with_nearest: bool = True) -> Json:
    found = Diagnosis(
        complete=True,
        summary="2 h at 4 MW need 8.4 MWh; 4 MWh are there.",
        conflicts=[Conflict(irreducible=True, members=[Member(pointer="/commitments/0", text="firm-evening")])],
        nearest_schedule=nearest_schedule() if with_nearest else None,
        cautions=list(CAUTIONS),
    )
    return found.model_dump(mode="json", by_alias=True)


def undecided_document() -> Json:
    found = Undecided(summary="1 s was not enough", margin_bound=700.0, best_attempt=None, cautions=list(CAUTIONS))
    return found.model_dump(mode="json", by_alias=True)
