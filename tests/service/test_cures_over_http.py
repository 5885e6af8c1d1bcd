"""What a diagnosis offers does what it says, all the way over HTTP: patch, send again, compare.

Each repair's patch is applied by a library of others to the request as the service gives it.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import jsonpatch
import pytest

from schemas.cautions import CAUTIONS
from schemas.diagnosis import Diagnosis
from service.calling import Api
from service.demo.own_service import own_service
from service.sample.fleets import kiln
from service.sample.windows import day_ahead
from service.web.results import FALLS_SHORT
from tests.oracles.random_infeasible import infeasible_request

Document = dict[str, Any]

GAP = 1e-6
ROUND_OFF = 1e-4
"""Money: two solves of one request, each within its gap, and the round-off of both."""

EVERY_LEVER = ["commitments", "targets", "planned_outages", "initial_energy", "limits"]


def kiln_job() -> Document:
    """Return the sample's promise that cannot be kept, fleet and window inline."""
    return {
        "fleet": kiln(),
        "window": day_ahead(),
        "initial": {"kiln-b1": {"stored_mwh": 0.4}},
        "commitments": [_hours("kiln-b1", 3, each_day=True, between=["17:00", "21:00"])],
    }


def quay_job(**more: Any) -> Document:
    """Return four hours of a store behind a narrow connection, with more asked than is stored and can come in."""
    store = {
        "id": "quay-b1",
        "kind": "storage",
        "site": "quay",
        "discharge_limit_mw": 1.0,
        "charge_limit_mw": 1.0,
        "energy_capacity_mwh": 2.0,
        "charge_efficiency": 0.95,
        "discharge_efficiency": 0.95,
    }
    return {
        "fleet": {"sites": [{"id": "quay", "import_limit_mw": 0.2}], "assets": [store]},
        "window": {
            "start": "2027-03-14T16:00:00+00:00",
            "interval": "PT60M",
            "timezone": "Europe/Lisbon",
            "currency": "EUR",
            "price_per_mwh": [40.0, 75.0, 90.0, 60.0],
            "price_basis": "forecast",
        },
        "initial": {"quay-b1": {"stored_mwh": 0.8}},
        "targets": {"quay-b1": {"final_stored_mwh": 0.1}},
        "commitments": [_hours("quay-b1", 3)],
        **more,
    }


def _hours(asset: str, hours: float, **more: Any) -> Document:
    return {
        "id": "firm-hours",
        "kind": "hours_at_least",
        "applies_to": {"assets": [asset]},
        "threshold": {"fraction_of_rated": 0.5},
        "hours": hours,
        **more,
    }


JOBS: dict[str, Document] = {
    "a promise of the sample": kiln_job(),
    "a narrow connection, every lever": quay_job(levers=EVERY_LEVER),
    "planned work": infeasible_request(8),
    "two levers at once": infeasible_request(19),
    "a target": infeasible_request(38),
    "nothing to be done": infeasible_request(16),
}


@dataclass(frozen=True)
class Refused:
    """A job that cannot be met: where it is, the request as the service gives it, and why."""

    name: str
    home: str
    request: Document
    diagnosis: Diagnosis


@pytest.fixture(scope="module")
def api() -> Iterator[Api]:
    with own_service() as service:
        yield service


def ended(api: Api, job: Document) -> Document:
    accepted = api.ask("POST", "/v1/jobs", {**job, "relative_gap": GAP}, Prefer="wait=30")
    assert accepted.status == 202, accepted.document
    record: Document = accepted.document
    while record["state"] in {"queued", "running"}:
        record = api.ask("GET", record["links"]["self"], Prefer="wait=30").document
    assert record["state"] == "finished", record
    return record


def given(api: Api, path: str) -> Any:
    answered = api.ask("GET", path)
    assert answered.status == 200, answered.document
    return answered.document


@pytest.fixture(scope="module", params=JOBS)
def refused(api: Api, request: pytest.FixtureRequest) -> Refused:
    record = ended(api, JOBS[request.param])
    assert record["outcome"] == "infeasible"
    links = record["links"]
    diagnosis = Diagnosis.model_validate(given(api, links["diagnosis"]))
    return Refused(request.param, links["self"], given(api, links["request"]), diagnosis)


def test_a_diagnosis_says_which_job_it_is_of_and_is_complete(refused: Refused) -> None:
    assert refused.diagnosis.job_id == refused.home.rsplit("/", 1)[1]
    assert refused.diagnosis.complete
    assert refused.diagnosis.summary
    assert all(conflict.irreducible for conflict in refused.diagnosis.conflicts)
    assert bool(refused.diagnosis.repairs) is (refused.name != "nothing to be done")
    assert refused.diagnosis.cautions == list(CAUTIONS)


def test_every_repair_sent_again_is_met_with_the_margin_that_was_said(api: Api, refused: Refused) -> None:
    for repair in refused.diagnosis.repairs:
        record = ended(api, jsonpatch.apply_patch(refused.request, repair.patch))
        assert record["outcome"] == "optimal", repair.text
        schedule = given(api, record["links"]["schedule"])
        slack = 2 * GAP * max(1.0, abs(repair.margin)) + ROUND_OFF
        assert repair.margin - slack <= schedule["margin"] <= repair.margin_bound + slack, repair.text
        assert schedule["verification"]["violations"] == []
        assert schedule["cautions"] == list(CAUTIONS)
        asked = {commitment["id"]: commitment for commitment in refused.request["commitments"]}
        binding = [row for row in schedule["commitments"] if not _is_priced(asked[row["id"]])]
        assert all(row["met"] for row in binding)


def _is_priced(commitment: Document) -> bool:
    return any(name.startswith("shortfall_price") and price is not None for name, price in commitment.items())


def test_the_nearest_schedule_is_given_to_who_takes_a_shortfall_and_says_that_it_is_one(
    api: Api, refused: Refused
) -> None:
    plain = api.ask("GET", f"{refused.home}/schedule")
    taken = api.ask("GET", f"{refused.home}/schedule?accept_shortfall=true")
    table = api.ask("GET", f"{refused.home}/schedule?accept_shortfall=true", Accept="text/csv")
    assert (plain.status, plain.document["type"]) == (404, "/problems/no-schedule")
    assert plain.document["diagnosis"] == f"{refused.home}/diagnosis"
    nearest = refused.diagnosis.nearest_schedule
    if nearest is None:
        assert refused.diagnosis.no_nearest_schedule
        assert (taken.status, table.status) == (404, 404)
        return
    assert (taken.status, table.status) == (200, 200)
    assert taken.document["cautions"] == [FALLS_SHORT, *CAUTIONS]
    assert FALLS_SHORT in table.headers["hourwright-caution"]
    assert [short["pointer"] for short in taken.document["shortfalls"]] == [s.pointer for s in nearest.shortfalls] != []
    assert [asset["power_mw"] for asset in taken.document["assets"]] == [asset.power_mw for asset in nearest.assets]


def test_each_lever_that_is_allowed_is_offered_where_it_works(api: Api) -> None:
    # 3 h at 0.5 MW take 1.58 MWh from the store. It holds 0.8 MWh, and in the hour that is left 0.19 MWh can come in:
    # no target, not even none, helps alone.
    offered = [
        {repair["change"]["lever"] for repair in _diagnosed(api, quay_job(levers=levers))["repairs"]}
        for levers in (EVERY_LEVER, ["limits"], ["targets"])
    ]
    assert offered == [{"commitments", "initial_energy", "limits"}, {"limits"}, set()]


def _diagnosed(api: Api, job: Document) -> Document:
    document: Document = given(api, ended(api, job)["links"]["diagnosis"])
    return document


def test_a_job_that_can_be_met_has_no_diagnosis(api: Api) -> None:
    record = ended(api, quay_job(commitments=[_hours("quay-b1", 1)]))
    answered = api.ask("GET", f"{record['links']['self']}/diagnosis")
    assert record["outcome"] == "optimal"
    assert record["links"]["diagnosis"] is None
    assert (answered.status, answered.document["type"]) == (404, "/problems/no-diagnosis")
    assert answered.document["schedule"] == record["links"]["schedule"]
    shortfall_taken = given(api, f"{record['links']['self']}/schedule?accept_shortfall=true")
    assert FALLS_SHORT not in shortfall_taken["cautions"]
