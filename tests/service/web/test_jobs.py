"""Jobs over HTTP: submitted, validated, read, listed, waited for, cancelled, forgotten."""

import json
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import pytest

from tests.schemas.documents import at, fleet, full, plain, window
from tests.service.web.answers import schedule_document
from tests.service.web.live import House

Json = dict[str, Any]
MEMBERS = {
    "id", "task", "label", "note", "submitted_by", "state", "outcome", "method", "progress", "queue_position",
    "attempt", "created_at", "started_at", "finished_at", "expires_at", "request_sha256", "fleet", "window", "error",
    "links",
}  # fmt: skip


def test_a_submission_is_accepted_with_the_job_as_its_body(house: House) -> None:
    answered = house.call("POST", "/v1/jobs", plain() | {"label": "day ahead", "note": "second run"})
    assert answered.status == 202
    job = answered.document
    assert set(job) == MEMBERS
    assert answered.headers["location"] == f"/v1/jobs/{job['id']}" == job["links"]["self"]
    assert int(answered.headers["retry-after"]) >= 1
    assert (job["state"], job["task"], job["method"], job["label"]) == ("queued", "schedule", "auto", "day ahead")
    assert house.call("GET", answered.headers["location"]).document == job


def test_the_resolved_request_is_a_valid_job_without_filled_in_defaults(house: House) -> None:
    job_id = house.submit(plain() | {"note": None})
    resolved = house.call("GET", f"/v1/jobs/{job_id}/request")
    assert resolved.status == 200
    assert resolved.document == plain()
    assert house.call("POST", "/v1/jobs", resolved.document).status == 202
    tag = resolved.headers["etag"]
    assert house.call("GET", f"/v1/jobs/{job_id}/request", if_none_match=tag).status == 304


def test_stored_documents_are_used_in_the_revision_they_have(house: House) -> None:
    house.call("PUT", "/v1/fleets/plain", plain()["fleet"])
    house.call("PUT", "/v1/windows/morning", plain()["window"])
    asked = {"fleet_id": "plain", "window_id": "morning", "fleet": None, "initial": plain()["initial"]}
    job_id = house.submit(asked)
    changed = plain()["fleet"]
    changed["assets"][0]["energy_capacity_mwh"] = 9.0
    house.call("PUT", "/v1/fleets/plain", changed)
    job = house.call("GET", f"/v1/jobs/{job_id}").document
    assert (job["fleet"], job["window"]) == ({"id": "plain", "revision": 1}, {"id": "morning", "revision": 1})
    resolved = house.call("GET", f"/v1/jobs/{job_id}/request").document
    assert resolved == plain()
    assert house.call("GET", f"/v1/jobs/{house.submit(asked)}").document["fleet"]["revision"] == 2


def test_all_faults_come_at_once_with_pointers_that_resolve(house: House) -> None:
    faulty = plain()
    faulty["fleet"]["assets"][0]["charge_efficiency"] = 2
    faulty["window"]["currency"] = "euro"
    faulty["time_limit_seconds"] = 0
    faulty["window_id"] = "nowhere"
    faulty["a/b~c"] = 1
    answered = house.call("POST", "/v1/jobs", faulty)
    assert (answered.status, answered.problem) == (422, "invalid-request")
    found = {entry["pointer"]: entry["code"] for entry in answered.document["errors"]}
    assert found["/fleet/assets/0/charge_efficiency"] == "out-of-range"
    assert found["/a~1b~0c"] == "unknown-field"
    assert {"/window/currency", "/time_limit_seconds", "/window_id"} <= set(found)
    for place in found:
        at(faulty, place)


def test_ids_of_documents_that_are_not_stored_are_faults_beside_the_others(house: House) -> None:
    asked = {"fleet_id": "gone", "window_id": "gone-too", "seed": -1}
    answered = house.call("POST", "/v1/jobs", asked)
    found = {entry["pointer"]: entry["code"] for entry in answered.document["errors"]}
    assert found == {"/fleet_id": "unknown-reference", "/window_id": "unknown-reference", "/seed": "out-of-range"}


def test_a_fault_that_shows_only_with_the_stored_fleet_points_at_what_was_sent(house: House) -> None:
    doubled = plain()["fleet"] | {"assets": [*plain()["fleet"]["assets"], {"id": "cs-base", "kind": "fixed_load"}]}
    house.call("PUT", "/v1/fleets/with-load", doubled)
    asked = {"fleet_id": "with-load", "window": plain()["window"], "initial": plain()["initial"], "method": "per_asset"}
    without_forecast = house.call("POST", "/v1/jobs", asked)
    assert [entry["pointer"] for entry in without_forecast.document["errors"]] == ["/forecasts/cs-base"]
    limited = doubled | {"export_limit_mw": 3.0}
    house.call("PUT", "/v1/fleets/with-load", limited)
    coupled = house.call("POST", "/v1/jobs", asked | {"forecasts": {"cs-base": 1.0}})
    assert (coupled.status, coupled.problem) == (422, "invalid-request")
    (fault,) = coupled.document["errors"]
    assert (fault["pointer"], fault["code"]) == ("/fleet_id", "coupled")
    assert "`with-load` in revision 2, at /export_limit_mw" in fault["detail"]


def test_what_this_version_does_not_plan_is_refused_by_name_at_what_was_sent(house: House) -> None:
    house.call("PUT", "/v1/fleets/everything", fleet())
    asked = full("schedule") | {"fleet_id": "everything", "window": window()}
    del asked["fleet"]
    answered = house.call("POST", "/v1/jobs", asked)
    assert (answered.status, answered.problem) == (422, "unsupported")
    found = {entry["pointer"] for entry in answered.document["errors"]}
    assert "/callback" in found
    assert found.isdisjoint({"/fleet_id", "/window_id", "/window/reserve_products"})


def test_per_asset_on_coupled_assets_is_refused(house: House) -> None:
    asked = plain() | {"method": "per_asset", "fleet": plain()["fleet"] | {"export_limit_mw": 5.0}}
    asked["fleet"]["assets"].append(asked["fleet"]["assets"][0] | {"id": "b2"})
    asked["initial"]["b2"] = {"stored_mwh": 1.0}
    answered = house.call("POST", "/v1/jobs", asked)
    assert answered.status == 422
    assert [entry["code"] for entry in answered.document["errors"]] == ["coupled"]


def test_a_sequence_of_stored_windows_is_read_and_refused_by_name(house: House) -> None:
    house.call("PUT", "/v1/windows/first", plain()["window"])
    asked = {"task": "sequence", "windows": ["first", "nowhere"], **plain()}
    del asked["window"]
    answered = house.call("POST", "/v1/jobs", asked)
    assert [entry["pointer"] for entry in answered.document["errors"]] == ["/windows/1"]
    asked["windows"] = ["first"]
    answered = house.call("POST", "/v1/jobs", asked)
    assert (answered.problem, [entry["pointer"] for entry in answered.document["errors"]]) == ("unsupported", ["/task"])


def test_validation_keeps_nothing_and_says_what_is_taken_as_read(house: House) -> None:
    before = house.call("GET", "/v1/jobs").document
    house.call("PUT", "/v1/fleets/to-validate", plain()["fleet"])
    asked = plain() | {"fleet_id": "to-validate", "needed_by": "1999-01-01T00:00:00Z", "missing_initial": "hold_out"}
    del asked["fleet"]
    asked["initial"] = {}
    answered = house.call("POST", "/v1/jobs/validate", asked)
    assert answered.status == 200
    found = answered.document
    assert found["valid"] is True
    assert [entry["pointer"] for entry in found["assumptions"]] == ["/initial/b1"]
    assert found["cautions"] == ["`needed_by` leaves no time to plan: the job would end undecided"]
    assert found["size"] == {
        "assets": 1, "sites": 0, "intervals": 4, "asset_intervals": 4, "commitment_rows": 0, "outages": 0,
    }  # fmt: skip
    assert house.call("GET", "/v1/jobs").document == before
    assert house.call("POST", "/v1/jobs/validate", {}).status == 422


def test_commitment_rows_are_counted_by_day_and_asset(house: House) -> None:
    promise = {
        "id": "c", "kind": "hours_at_least", "applies_to": {"assets": ["b1"]}, "threshold": {"mw": 1}, "hours": 1,
        "each_day": True,
    }  # fmt: skip
    asked = plain() | {"commitments": [promise]}
    asked["window"]["start"] = "2027-03-14T22:00:00+00:00"
    assert house.call("POST", "/v1/jobs/validate", asked).document["size"]["commitment_rows"] == 2


def test_a_key_sent_twice_is_answered_with_the_first_job(house: House) -> None:
    first = house.call("POST", "/v1/jobs", plain(), idempotency_key='"once"')
    again = house.call("POST", "/v1/jobs", plain(), idempotency_key="once")
    assert (first.status, again.status) == (202, 202)
    assert again.document["id"] == first.document["id"]
    assert again.headers["location"] == first.headers["location"]
    assert again.headers["idempotency-replayed"] == "true"
    assert "idempotency-replayed" not in first.headers
    other = house.call("POST", "/v1/jobs", plain() | {"seed": 1}, idempotency_key='"once"')
    assert (other.status, other.problem) == (422, "key-reused")


def test_a_key_stands_for_the_parsed_content_however_it_is_written(house: House) -> None:
    asked = plain()
    first = house.call("POST", "/v1/jobs", json.dumps(asked).encode(), idempotency_key='"parsed"')
    asked["window"]["price_per_mwh"] = [50, 60, 70, 80]
    written = json.dumps(dict(reversed(asked.items())) | {"note": None}, indent=2).encode()
    again = house.call("POST", "/v1/jobs", written, idempotency_key='"parsed"')
    assert again.document["id"] == first.document["id"]


def test_a_key_is_answered_although_the_stored_fleet_has_changed_since(house: House) -> None:
    house.call("PUT", "/v1/fleets/fleeting", plain()["fleet"])
    asked = {"fleet_id": "fleeting", "window": plain()["window"], "initial": plain()["initial"]}
    first = house.call("POST", "/v1/jobs", asked, idempotency_key='"kept"')
    house.call("DELETE", "/v1/fleets/fleeting")
    again = house.call("POST", "/v1/jobs", asked, idempotency_key='"kept"')
    assert (again.status, again.document["id"]) == (202, first.document["id"])
    assert house.call("POST", "/v1/jobs", asked).status == 422


def test_twenty_submissions_at_once_with_one_key_are_one_job(house: House) -> None:
    def submit(_number: int) -> Any:
        return house.call("POST", "/v1/jobs", plain(), idempotency_key='"at-once"')

    with ThreadPoolExecutor(20) as callers:
        answers = list(callers.map(submit, range(20)))
    assert {answered.status for answered in answers} == {202}
    assert len({answered.document["id"] for answered in answers}) == 1


@pytest.mark.parametrize("key", ["", '""', '"open', "a b", '"a", "b"', '"' + "k" * 256 + '"', '"\xe9"', '"a"; p=1'])
def test_a_malformed_key_is_refused(house: House, key: str) -> None:
    answered = house.call("POST", "/v1/jobs", plain(), idempotency_key=key)
    assert (answered.status, answered.problem) == (400, "malformed-header")
    assert answered.document["errors"][0]["header"] == "Idempotency-Key"


def test_without_a_key_the_same_request_is_another_job(house: House) -> None:
    first, second = (house.call("POST", "/v1/jobs", plain()).document for _ in range(2))
    assert first["id"] != second["id"]
    assert first["request_sha256"] == second["request_sha256"]


def test_a_job_is_read_with_an_entity_tag_of_its_state(house: House) -> None:
    job_id = house.submit(plain())
    tag = house.call("GET", f"/v1/jobs/{job_id}").headers["etag"]
    assert house.call("GET", f"/v1/jobs/{job_id}", if_none_match=tag).status == 304
    assert house.call("GET", f"/v1/jobs/{job_id}", if_match='"other"').status == 412
    house.jobs.begin(job_id)
    changed = house.call("GET", f"/v1/jobs/{job_id}", if_none_match=tag)
    assert (changed.status, changed.document["state"]) == (200, "running")
    assert changed.headers["retry-after"] == "1"
    house.jobs.finish(job_id, schedule_document())
    ended = house.call("GET", f"/v1/jobs/{job_id}")
    assert "retry-after" not in ended.headers
    assert ended.document["links"]["cancel"] is None
    assert ended.document["links"]["schedule"] == f"/v1/jobs/{job_id}/schedule"


@pytest.mark.parametrize("name", ["job-unknown", "a%00b", "%2e%2e", "x" * 65, "%ff"])
@pytest.mark.parametrize("part", ["", "/request", "/schedule", "/diagnosis"])
def test_a_job_that_is_not_there_is_not_found(house: House, name: str, part: str) -> None:
    answered = house.call("GET", f"/v1/jobs/{name}{part}")
    assert (answered.status, answered.problem) == (404, "no-such-job")


def test_jobs_are_listed_newest_first_and_paged(house: House) -> None:
    ids = [house.submit(plain() | {"label": "paged ä&"}) for _ in range(5)]
    found: list[str] = []
    path = "/v1/jobs?label=paged+%C3%A4%26&limit=2"
    pages = 0
    while path:
        page = house.call("GET", path)
        pages += 1
        found += [job["id"] for job in page.document["jobs"]]
        path = page.headers.get("link", "").partition(">")[0].removeprefix("<")
        if pages == 1:
            house.submit(plain() | {"label": "paged ä&"})  # what comes in while paging neither doubles nor hides
    assert found == list(reversed(ids))
    assert pages == 3


def test_jobs_are_listed_by_state(house: House) -> None:
    job_id = house.submit(plain() | {"label": "by state"})
    house.jobs.begin(job_id)
    running = house.call("GET", "/v1/jobs?state=running&label=by+state").document["jobs"]
    assert [job["id"] for job in running] == [job_id]
    assert house.call("GET", "/v1/jobs?state=queued&label=by+state").document == {"jobs": [], "next": None}


@pytest.mark.parametrize("query", ["state=done", "state=", "label=" + "x" * 201, "since=1", "cursor=a&cursor=b"])
def test_a_faulty_query_is_refused(house: House, query: str) -> None:
    answered = house.call("GET", f"/v1/jobs?{query}")
    assert (answered.status, answered.problem) == (422, "invalid-parameters")


def test_every_fault_of_a_query_is_named(house: House) -> None:
    answered = house.call("GET", "/v1/jobs?state=done&limit=0&x=1&label=a&label=b")
    assert {entry["parameter"] for entry in answered.document["errors"]} == {"state", "limit", "x", "label"}


def test_a_made_up_cursor_is_refused(house: House) -> None:
    answered = house.call("GET", "/v1/jobs?cursor=made-up%00")
    assert (answered.status, answered.problem) == (400, "bad-cursor")


def test_a_queued_job_is_cancelled_at_once_and_again(house: House) -> None:
    job_id = house.submit(plain())
    for body in ({}, {"keep_best": False}, {"keep_best": None}, None):
        answered = house.call("POST", f"/v1/jobs/{job_id}/cancel", body)
        assert (answered.status, answered.document["state"]) == (200, "cancelled")


def test_a_running_job_is_asked_to_end(house: House) -> None:
    job_id = house.submit(plain())
    house.jobs.begin(job_id)
    answered = house.call("POST", f"/v1/jobs/{job_id}/cancel", {"keep_best": True})
    assert (answered.status, answered.document["state"]) == (202, "cancelling")
    assert answered.headers["retry-after"] == "1"
    assert house.jobs.job(job_id).cancel == "keep_best"


def test_an_ended_job_is_not_cancelled(house: House) -> None:
    job_id = house.submit(plain())
    house.jobs.finish(job_id, schedule_document())
    answered = house.call("POST", f"/v1/jobs/{job_id}/cancel")
    assert (answered.status, answered.problem) == (409, "already-ended")
    assert answered.document["state"] == "finished"


@pytest.mark.parametrize("body", [{"keep_best": 1}, {"keep": True}, [], "x", b"null"])
def test_a_faulty_cancellation_changes_nothing(house: House, body: object) -> None:
    job_id = house.submit(plain())
    answered = house.call("POST", f"/v1/jobs/{job_id}/cancel", body)
    assert (answered.status, answered.problem) == (422, "invalid-request")
    assert house.call("GET", f"/v1/jobs/{job_id}").document["state"] == "queued"
    assert house.call("POST", f"/v1/jobs/{job_id}/cancel", b"{", content_type="application/json").status == 400
    assert house.call("POST", f"/v1/jobs/{job_id}/cancel", b"{}", content_type="text/plain").status == 415
    assert house.call("POST", "/v1/jobs/nowhere/cancel", {}).status == 404


def test_an_ended_job_is_forgotten_and_stays_so(house: House) -> None:
    job_id = house.submit(plain())
    live = house.call("DELETE", f"/v1/jobs/{job_id}")
    assert (live.status, live.problem) == (409, "still-live")
    house.jobs.finish(job_id, schedule_document())
    assert house.call("DELETE", f"/v1/jobs/{job_id}").status == 204
    for method, part in [("GET", ""), ("GET", "/schedule"), ("POST", "/cancel"), ("DELETE", ""), ("GET", "/request")]:
        answered = house.call(method, f"/v1/jobs/{job_id}{part}")
        assert (answered.status, answered.problem) == (410, "job-forgotten")


def test_a_failed_job_says_why_and_is_no_error_to_read(house: House) -> None:
    job_id = house.submit(plain())
    house.jobs.fail(job_id)
    answered = house.call("GET", f"/v1/jobs/{job_id}")
    assert answered.status == 200
    assert answered.document["error"] == {"reason": "worker-lost", "detail": "three workers died on it"}


def test_a_full_store_takes_no_job_and_says_when_to_come_back(house: House) -> None:
    house.outage.is_full = True
    answered = house.call("POST", "/v1/jobs", plain())
    house.outage.lift()
    assert (answered.status, answered.problem) == (503, "store-full")
    assert answered.headers["retry-after"] == "7"
