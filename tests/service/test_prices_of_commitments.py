"""What commitments cost, all the way over HTTP."""

from typing import Any

import pytest

from service.calling import Api
from service.demo.own_service import own_service
from tests.workers.planning.pricing.priced_jobs import costs_asked, small

MARGINS = [(0, 70.0), (1, 70.0), (2, 70.0), (3, 65.0), (4, 50.0)]
"""tests/reference/storage_small.json: 70 free, 65 with three hours, 50 with four, five are infeasible."""


def ended(api: Api, document: dict[str, Any]) -> dict[str, Any]:
    accepted = api.ask("POST", "/v1/jobs", document, Prefer="wait=30")
    assert accepted.status == 202, accepted.document
    record: dict[str, Any] = accepted.document
    while record["state"] in {"queued", "running"}:
        record = api.ask("GET", f"/v1/jobs/{record['id']}", Prefer="wait=30").document
    assert record["state"] == "finished"
    return record


def listed(answer: dict[str, Any]) -> list[tuple[float, float]]:
    return [(entry["hours"], round(entry["margin"], 6)) for entry in answer["commitment_costs"]]


def test_each_further_hour_is_priced_whether_the_job_can_be_met_or_not() -> None:
    with own_service() as api:
        checked = api.ask("POST", "/v1/jobs/validate", costs_asked(small(3)))
        record = ended(api, costs_asked(small(3)) | {"explain_commitments": True})
        schedule = api.ask("GET", f"/v1/jobs/{record['id']}/schedule").document
        request = api.ask("GET", f"/v1/jobs/{record['id']}/request").document
        refused = ended(api, costs_asked(small(5)))
        diagnosis = api.ask("GET", f"/v1/jobs/{refused['id']}/diagnosis").document
        unknown = api.ask("POST", "/v1/jobs", costs_asked(small(3), commitment="morning"))
    assert checked.document["valid"] is True
    assert (record["task"], record["outcome"]) == ("commitment_costs", "optimal")
    assert listed(schedule) == MARGINS
    assert schedule["margin"] == pytest.approx(65.0)
    (row,) = schedule["commitments"]
    assert row["margin_forgone"] == {"at_least": pytest.approx(5.0), "at_most": pytest.approx(5.0)}
    assert (request["task"], request["commitment"], request["step_hours"]) == ("commitment_costs", "evening", 1.0)
    assert refused["outcome"] == "infeasible"
    assert listed(diagnosis) == MARGINS
    assert unknown.status == 422
    assert [entry["pointer"] for entry in unknown.document["errors"]] == ["/commitment"]
