"""The sample is loaded once and kept, and each of its jobs ends as its line says."""

import json
import re
import shlex
from datetime import UTC, datetime
from typing import Any

import pytest

from schemas.calendar import Calendar
from schemas.job import ScheduleJob
from schemas.reading import read_job
from schemas.support import require_supported
from service.calling import Api, NotReached, url_of
from service.sample.loading import NotTaken, load
from service.sample.trials import Trial, documents, trials
from tests.service.web.live import served
from workers.planning.limits import Limits
from workers.planning.plan import plan

Document = dict[str, Any]
SECONDS_FOR_THE_LONG_ONE = 1.0


def whole(trial: Trial) -> Document:
    """Return a trial's job with the latest revisions of what it names inline."""
    stored = {document.id: document.revisions[-1] for document in documents()}
    job = dict(trial.job)
    inline = {"fleet": stored[job.pop("fleet_id")], "window": stored[job.pop("window_id")]}
    return {**job, **inline}


@pytest.mark.parametrize("trial", trials(), ids=lambda trial: trial.tries)
def test_a_trial_ends_as_its_line_says(trial: Trial) -> None:
    document = whole(trial)
    takes_long = "time limit" in trial.expect
    if takes_long:
        document["time_limit_seconds"] = SECONDS_FOR_THE_LONG_ONE
    job = read_job(document)
    require_supported(job)
    found = plan(job, Limits.of(job, datetime.now(UTC)))
    # Cut short, the long one may have no schedule yet; that it is not done is the point.
    expected = ("feasible", "undecided") if takes_long else (re.findall(r"optimal|infeasible", trial.expect)[0],)
    assert found.outcome in expected


def test_the_day_on_which_clocks_go_back_has_25_hours_and_two_o_clock_twice() -> None:
    (trial,) = [trial for trial in trials() if "25 intervals" in trial.expect]
    job = read_job(whole(trial))
    assert isinstance(job, ScheduleJob)
    assert job.window is not None
    hours = [start.hour for start in Calendar.of(job.window).local_starts]
    assert (len(hours), hours.count(2)) == (25, 2)


def test_late_prices_are_a_second_revision_of_the_same_hours() -> None:
    (late,) = [document for document in documents() if len(document.revisions) > 1]
    forecast, published = late.revisions
    assert (forecast["price_basis"], published["price_basis"]) == ("forecast", "published")
    assert forecast["start"] == published["start"]
    assert len(forecast["price_per_mwh"]) == len(published["price_per_mwh"]) == 24
    assert forecast["price_per_mwh"] != published["price_per_mwh"]


def test_it_is_loaded_once_and_what_is_there_is_kept() -> None:
    with served() as house:
        api = Api("127.0.0.1", house.port)
        first, again = list(load(api)), list(load(api))
        assert len(documents()) == sum("is kept" in line for line in again)
        assert not any("is kept" in line for line in first)
        for document in documents():
            revisions = house.call("GET", f"/v1/{document.kind}s/{document.id}/revisions").document["revisions"]
            assert len(revisions) == len(document.revisions)
            assert house.call("GET", f"/v1/{document.kind}s/{document.id}").document == document.revisions[-1]


def test_each_command_submits_a_job_that_is_accepted() -> None:
    with served() as house:
        commands = [line for line in load(Api("127.0.0.1", house.port)) if line.startswith("curl ")]
        assert len(commands) == len(trials())
        for command in commands:
            words = shlex.split(command)
            assert words[2] == f"http://127.0.0.1:{house.port}/v1/jobs"
            assert house.call("POST", "/v1/jobs", json.loads(words[words.index("-d") + 1])).status == 202


def test_a_document_that_is_not_taken_is_told_with_the_answer() -> None:
    with served() as house:
        house.outage.begin()
        with pytest.raises(NotTaken, match="fleet sample-quay is answered 503"):
            list(load(Api("127.0.0.1", house.port)))


def test_a_service_that_is_not_there_is_told() -> None:
    with pytest.raises(NotReached, match=r"PUT http://127\.0\.0\.1:1/v1/fleets/sample-quay: "):
        list(load(Api("127.0.0.1", 1)))


def test_an_address_of_ipv6_stands_in_brackets() -> None:
    assert url_of("::1", 8080) == "http://[::1]:8080"
    assert url_of("localhost", 8080) == "http://localhost:8080"
