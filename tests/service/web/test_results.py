"""Schedules as JSON and CSV, and diagnoses."""

import csv
import io
from datetime import UTC, datetime
from typing import Any

import pytest

from service.web import schedule_csv
from tests.service.web.answers import (
    INTERVALS,
    diagnosis_document,
    job,
    schedule_document,
    undecided_document,
)
from tests.service.web.live import House

CSV = "text/csv"


def finished(house: House, violated: bool = False) -> str:
    job_id = house.submit(job())
    house.jobs.finish(job_id, schedule_document(violated), "violated" if violated else "optimal")
    return job_id


def infeasible(house: House, with_nearest: bool = True) -> str:
    job_id = house.submit(job())
    house.jobs.finish(job_id, diagnosis_document(with_nearest), "infeasible", "diagnosis")
    return job_id


def test_a_schedule_is_the_answer_with_its_job_named(house: House) -> None:
    job_id = finished(house)
    answered = house.call("GET", f"/v1/jobs/{job_id}/schedule")
    assert answered.status == 200
    assert answered.headers["content-type"] == "application/json"
    assert answered.document == schedule_document() | {"job_id": job_id}
    assert answered.document["cautions"]


def test_a_schedule_is_narrowed_to_the_assets_asked_for(house: House) -> None:
    path = f"/v1/jobs/{finished(house)}/schedule"
    one = house.call("GET", f"{path}?asset=quay-b2").document
    assert [asset["id"] for asset in one["assets"]] == ["quay-b2"]
    assert one["margin"] == 616.57
    both = house.call("GET", f"{path}?asset=quay-b2&asset=cs-b1").document
    assert [asset["id"] for asset in both["assets"]] == ["cs-b1", "quay-b2"]


@pytest.mark.parametrize(
    "query", ["asset=nobody", "asset=", "asset=a%20b", "accept_shortfall=yes", "accept_shortfall="]
)
def test_a_faulty_choice_is_refused_by_parameter(house: House, query: str) -> None:
    answered = house.call("GET", f"/v1/jobs/{finished(house)}/schedule?{query}")
    assert (answered.status, answered.problem) == (422, "invalid-parameters")
    assert answered.document["errors"][0]["parameter"] == query.partition("=")[0]


def test_a_schedule_never_changes_and_is_not_sent_twice(house: House) -> None:
    path = f"/v1/jobs/{finished(house)}/schedule"
    first, second = house.call("GET", path), house.call("GET", path)
    assert first.body == second.body
    assert first.headers["etag"] == second.headers["etag"]
    assert house.call("GET", path, if_none_match=first.headers["etag"]).status == 304
    narrowed = house.call("GET", f"{path}?asset=cs-b1")
    table = house.call("GET", path, accept=CSV)
    assert len({first.headers["etag"], narrowed.headers["etag"], table.headers["etag"]}) == 3
    assert "Accept" in first.headers["vary"]


def test_csv_holds_one_line_for_each_asset_and_interval(house: House) -> None:
    answered = house.call("GET", f"/v1/jobs/{finished(house)}/schedule", accept=CSV)
    assert answered.status == 200
    assert answered.headers["content-type"].startswith("text/csv; charset=utf-8")
    assert "Advisory" in answered.headers["hourwright-caution"]
    text = answered.body.decode()
    assert text.count("\r\n") == text.count("\n") == 1 + 2 * INTERVALS
    header, *rows = csv.reader(io.StringIO(text, newline=""), strict=True)
    assert header == list(schedule_csv.COLUMNS)
    assert [row[3] for row in rows] == ["cs-b1"] * INTERVALS + ["quay-b2"] * INTERVALS
    assert [row[2] for row in rows] == ["cold-store"] * INTERVALS + [""] * INTERVALS
    # RFC 3339: the hour that comes twice is told apart by its offset.
    assert [row[1] for row in rows[:INTERVALS]] == [
        "2027-10-31T00:00:00+01:00",
        "2027-10-31T01:00:00+01:00",
        "2027-10-31T01:00:00+00:00",
        "2027-10-31T02:00:00+00:00",
    ]
    assert [row[0] for row in rows[:INTERVALS]] == [f"2027-10-{day}Z" for day in (
        "30T23:00:00", "31T00:00:00", "31T01:00:00", "31T02:00:00",
    )]  # fmt: skip


def test_csv_and_json_say_the_same(house: House) -> None:
    path = f"/v1/jobs/{finished(house)}/schedule"
    document: dict[str, Any] = house.call("GET", path).document
    rows = list(csv.DictReader(io.StringIO(house.call("GET", path, accept=CSV).body.decode(), newline="")))
    for asset in document["assets"]:
        own = [row for row in rows if row["asset"] == asset["id"]]
        assert [float(row["power_mw"]) for row in own] == asset["power_mw"]
        stored = None if own[0]["stored_mwh"] == "" else [float(row["stored_mwh"]) for row in own]
        assert stored == asset["stored_mwh"]
        on = None if own[0]["on"] == "" else [row["on"] == "true" for row in own]
        assert on == asset["on"]
        for row, start in zip(own, document["interval_starts"], strict=True):
            utc = datetime.fromisoformat(row["interval_start_utc"])
            assert utc.tzinfo == UTC
            assert utc == datetime.fromisoformat(row["interval_start_local"]) == datetime.fromisoformat(start)


def test_csv_has_a_column_for_each_product_of_the_window() -> None:
    asset = {"id": "b1", "power_mw": [1.0, 2.0], "reserve_mw": {"up-15": [0.5, 0.25]}}
    starts = ["2027-03-14T00:00:00+00:00", "2027-03-14T01:00:00+00:00"]
    text = "".join(schedule_csv.lines(starts, iter([asset]), {}, ["up-15", "down-5"]))
    header, first, second = csv.reader(io.StringIO(text, newline=""))
    assert header[-2:] == ["reserve_up-15_mw", "reserve_down-5_mw"]
    assert (first[-2:], second[-2:]) == (["0.5", ""], ["0.25", ""])


def test_csv_of_a_checked_schedule_that_breaks_rules_says_so_first(house: House) -> None:
    answered = house.call("GET", f"/v1/jobs/{finished(house, violated=True)}/schedule", accept=CSV)
    assert answered.headers["hourwright-caution"].startswith("The schedule that was checked breaks rules")


@pytest.mark.parametrize(
    ("accept", "media"),
    [
        ("*/*", "application/json"),
        ("text/csv;q=0.5, application/json;q=0.4", "text/csv"),
        ("text/*", "text/csv"),
        ("text/csv;q=0, */*", "application/json"),
        ("application/problem+json", "application/json"),
        ("text/html, application/xhtml+xml, */*;q=0.8", "application/json"),
        ("text/csv; header=present", "text/csv"),
        ("", "application/json"),
    ],
)
def test_the_form_follows_what_the_caller_accepts(house: House, accept: str, media: str) -> None:
    answered = house.call("GET", f"/v1/jobs/{finished(house)}/schedule", accept=accept)
    assert answered.status == 200
    assert answered.headers["content-type"].startswith(media)


@pytest.mark.parametrize("accept", ["text/html", "image/*", "application/json;q=0", "text/csv;q=x", ",", "garbage"])
def test_a_form_that_is_not_offered_is_not_acceptable(house: House, accept: str) -> None:
    answered = house.call("GET", f"/v1/jobs/{finished(house)}/schedule", accept=accept)
    assert (answered.status, answered.problem) == (406, "not-acceptable")
    assert answered.document["offers"] == ["application/json", "text/csv"]


@pytest.mark.parametrize("part", ["schedule", "schedule?accept_shortfall=true", "diagnosis"])
def test_an_answer_is_not_there_before_the_end(house: House, part: str) -> None:
    job_id = house.submit(job())
    answered = house.call("GET", f"/v1/jobs/{job_id}/{part}")
    assert (answered.status, answered.problem) == (409, "not-finished")
    assert answered.headers["retry-after"] == "1"
    assert answered.document["state"] == "queued"


def test_an_infeasible_job_has_a_diagnosis_and_no_schedule(house: House) -> None:
    job_id = infeasible(house)
    answered = house.call("GET", f"/v1/jobs/{job_id}/schedule")
    assert (answered.status, answered.problem) == (404, "no-schedule")
    assert answered.document["diagnosis"] == f"/v1/jobs/{job_id}/diagnosis"
    found = house.call("GET", answered.document["diagnosis"])
    assert found.status == 200
    assert found.document == diagnosis_document() | {"job_id": job_id}
    assert house.call("GET", f"/v1/jobs/{job_id}/diagnosis", if_none_match=found.headers["etag"]).status == 304
    assert house.call("GET", f"/v1/jobs/{job_id}").document["outcome"] == "infeasible"


def test_the_nearest_schedule_is_given_to_who_accepts_a_shortfall(house: House) -> None:
    path = f"/v1/jobs/{infeasible(house)}/schedule?accept_shortfall=true"
    answered = house.call("GET", path)
    assert answered.status == 200
    assert [asset["id"] for asset in answered.document["assets"]] == ["cs-b1", "quay-b2"]
    assert answered.document["cautions"][0].startswith("This schedule does not meet the request")
    narrowed = house.call("GET", f"{path}&asset=cs-b1").document
    assert [asset["id"] for asset in narrowed["assets"]] == ["cs-b1"]
    assert house.call("GET", f"{path}&asset=nobody").status == 422
    table = house.call("GET", path, accept=CSV)
    assert table.headers["hourwright-caution"].startswith("This schedule does not meet the request")
    assert house.call("GET", f"/v1/jobs/{infeasible(house)}/schedule?accept_shortfall=false").status == 404


def test_without_a_nearest_schedule_a_shortfall_is_accepted_in_vain(house: House) -> None:
    answered = house.call("GET", f"/v1/jobs/{infeasible(house, with_nearest=False)}/schedule?accept_shortfall=true")
    assert (answered.status, answered.problem) == (404, "no-schedule")


def test_a_feasible_job_has_no_diagnosis(house: House) -> None:
    job_id = finished(house)
    answered = house.call("GET", f"/v1/jobs/{job_id}/diagnosis")
    assert (answered.status, answered.problem) == (404, "no-diagnosis")
    assert answered.document["schedule"] == f"/v1/jobs/{job_id}/schedule"


def test_an_undecided_job_says_what_is_known_in_place_of_a_diagnosis(house: House) -> None:
    job_id = house.submit(job())
    house.jobs.finish(job_id, undecided_document(), "undecided", "undecided")
    assert house.call("GET", f"/v1/jobs/{job_id}/diagnosis").document["margin_bound"] == 700.0
    answered = house.call("GET", f"/v1/jobs/{job_id}/schedule?accept_shortfall=true")
    assert (answered.status, answered.problem) == (404, "no-schedule")


@pytest.mark.parametrize("part", ["schedule", "diagnosis"])
def test_a_job_without_an_answer_says_how_it_stands(house: House, part: str) -> None:
    failed, cancelled = house.submit(job()), house.submit(job())
    house.jobs.fail(failed)
    house.jobs.cancel(cancelled)
    for job_id, state in ((failed, "failed"), (cancelled, "cancelled")):
        answered = house.call("GET", f"/v1/jobs/{job_id}/{part}")
        assert (answered.status, answered.problem) == (404, f"no-{part}")
        assert answered.document["state"] == state


def test_head_is_answered_like_get_without_a_body(house: House) -> None:
    path = f"/v1/jobs/{finished(house)}/schedule"
    asked = house.call("GET", path)
    answered = house.say(f"HEAD {path} HTTP/1.1\r\nHost: h\r\n\r\n".encode(), method="HEAD")
    assert answered is not None
    assert (answered.status, answered.body) == (200, b"")
    assert answered.headers["etag"] == asked.headers["etag"]
