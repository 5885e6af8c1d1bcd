"""The same conversations with the real store, a real worker and a real keeper behind them."""

import csv
import io
from collections.abc import Iterator
from typing import Any

import pytest

from service.web.application import create_app
from tests.faults.deployment import Deployment
from tests.service.web.answers import job
from tests.service.web.live import SMALL, Line, listening

WAIT = "wait=30"


@pytest.fixture(scope="module")
def deployment(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Deployment]:
    found = Deployment(tmp_path_factory.mktemp("house"))
    try:
        found.keeper()
        found.worker()
        found.until(lambda: found.jobs.health().keeper_seen, "a keeper is seen")
        yield found
    finally:
        found.close()


@pytest.fixture(scope="module")
def line(deployment: Deployment) -> Iterator[Line]:
    with listening(create_app(SMALL, deployment.jobs, deployment.documents), SMALL) as port:
        yield Line(port)


def by_reference() -> dict[str, Any]:
    asked = job() | {"fleet_id": "pellow-bay", "window_id": "day-ahead"}
    del asked["fleet"], asked["window"]
    return asked


@pytest.fixture(scope="module")
def stored(line: Line) -> None:
    assert line.call("PUT", "/v1/fleets/pellow-bay", job()["fleet"] | {"note": "first"}).status == 201
    assert line.call("PUT", "/v1/windows/day-ahead", job()["window"]).status == 201


@pytest.mark.usefixtures("stored")
def test_a_job_goes_from_stored_documents_to_a_schedule(line: Line) -> None:
    answered = line.call("POST", "/v1/jobs", by_reference(), prefer=WAIT, idempotency_key='"day one"')
    assert answered.status == 202
    found = answered.document
    assert (found["state"], found["outcome"]) == ("finished", "optimal")
    assert found["fleet"] == {"id": "pellow-bay", "revision": 1}
    assert "retry-after" not in answered.headers
    schedule = line.call("GET", found["links"]["schedule"]).document
    assert schedule["job_id"] == found["id"]
    assert schedule["verification"]["violations"] == []
    assert schedule["cautions"]
    table = line.call("GET", found["links"]["schedule"], accept="text/csv")
    rows = list(csv.DictReader(io.StringIO(table.body.decode(), newline="")))
    for asset in schedule["assets"]:
        own = [row for row in rows if row["asset"] == asset["id"]]
        assert [float(row["power_mw"]) for row in own] == asset["power_mw"]
        assert [float(row["stored_mwh"]) for row in own] == asset["stored_mwh"]
    one = line.call("GET", f"{found['links']['schedule']}?asset=quay-b2").document
    assert [asset["id"] for asset in one["assets"]] == ["quay-b2"]
    assert line.call("GET", f"{found['links']['schedule']}?asset=nobody").status == 422
    resolved = line.call("GET", found["links"]["request"]).document
    assert resolved["fleet"] == job()["fleet"] | {"note": "first"}
    assert line.call("GET", f"/v1/jobs/{found['id']}/diagnosis").problem == "no-diagnosis"
    again = line.call("POST", "/v1/jobs", by_reference(), idempotency_key='"day one"')
    assert again.document["id"] == found["id"]
    assert again.headers["idempotency-replayed"] == "true"
    other = line.call("POST", "/v1/jobs", by_reference() | {"seed": 5}, idempotency_key='"day one"')
    assert other.problem == "key-reused"


def test_a_job_that_cannot_be_met_ends_with_its_diagnosis(line: Line) -> None:
    promise = {
        "id": "firm-evening",
        "kind": "hours_at_least",
        "applies_to": {"assets": ["cs-b1"]},
        "threshold": {"mw": 4.0},
        "hours": 4,
    }
    found = line.call("POST", "/v1/jobs", job() | {"commitments": [promise]}, prefer=WAIT).document
    assert (found["state"], found["outcome"]) == ("finished", "infeasible")
    assert line.call("GET", f"/v1/jobs/{found['id']}/schedule").problem == "no-schedule"
    diagnosis = line.call("GET", found["links"]["diagnosis"])
    assert diagnosis.status == 200
    assert diagnosis.document["summary"]


def test_an_ended_job_is_forgotten(line: Line) -> None:
    found = line.call("POST", "/v1/jobs", job(), prefer=WAIT).document
    assert line.call("POST", f"/v1/jobs/{found['id']}/cancel", {}).problem == "already-ended"
    assert line.call("DELETE", f"/v1/jobs/{found['id']}").status == 204
    assert line.call("GET", f"/v1/jobs/{found['id']}").problem == "job-forgotten"
    assert line.call("GET", "/v1/jobs/never-was").problem == "no-such-job"


def test_jobs_are_paged_through_their_links(line: Line) -> None:
    ids = [line.submit(job() | {"label": "paged"}) for _ in range(5)]
    found: list[str] = []
    path = "/v1/jobs?label=paged&limit=2"
    while path:
        page = line.call("GET", path)
        assert page.status == 200
        found += [each["id"] for each in page.document["jobs"]]
        path = page.headers.get("link", "").partition(">")[0].removeprefix("<")
    assert found == list(reversed(ids))
    assert line.call("GET", "/v1/jobs?cursor=made-up").problem == "bad-cursor"


@pytest.mark.usefixtures("stored")
def test_documents_are_revised_under_conditions(line: Line) -> None:
    tag = line.call("GET", "/v1/windows/day-ahead").headers["etag"]
    assert line.call("GET", "/v1/windows/day-ahead", if_none_match=tag).status == 304
    changed = job()["window"] | {"price_basis": "published"}
    assert line.call("PUT", "/v1/windows/day-ahead", changed, if_match='"other"').problem == "precondition-failed"
    assert line.call("PUT", "/v1/windows/day-ahead", changed, if_match=tag).document["revision"] == 2
    assert line.call("GET", "/v1/windows/day-ahead/revisions/1").document == job()["window"]
    listed = line.call("GET", "/v1/windows/day-ahead/revisions?limit=1").document
    assert [entry["revision"] for entry in listed["revisions"]] == [2]
    assert listed["next"]


def test_those_at_work_are_seen(line: Line) -> None:
    ready = line.call("GET", "/health/ready").document
    assert ready["status"] == "pass"
    assert ready["checks"]["workers_by_queue"] == {"jobs": 1}


def test_without_redis_callers_are_told_to_come_back(tmp_path_factory: pytest.TempPathFactory) -> None:
    house = Deployment(tmp_path_factory.mktemp("lost"))
    with listening(create_app(SMALL, house.jobs, house.documents), SMALL) as port:
        line = Line(port)
        assert line.call("GET", "/health/ready").status == 200
        house.close()
        for method, path, body in [
            ("POST", "/v1/jobs", job()),
            ("GET", "/v1/jobs/x", None),
            ("GET", "/v1/fleets", None),
        ]:
            answered = line.call(method, path, body)
            assert (answered.status, answered.problem) == (503, "store-unreachable")
            assert answered.headers["retry-after"]
        assert line.call("GET", "/health/ready").status == 503
        assert line.call("GET", "/health/live").status == 200
