"""From which power an hour counts, as the table of commitments says it."""

from typing import Any

import pytest

from schemas.commitments import HoursAtLeast
from schemas.job import ScheduleJob
from schemas.reading import read_job
from service.demo import scenario
from service.demo.commitments_text import threshold_mw


@pytest.mark.parametrize(
    ("applies_to", "asset", "more", "expected_mw"),
    [
        ({"assets": ["cs-b1", "hb-b1"]}, "hb-b1", {}, 3.0),
        ({"group": ["cs-b1", "hb-b1"]}, None, {}, 5.0),
        ({"site": "harbour"}, None, {}, 4.65),
        ({"fleet": True}, None, {}, 10.0),
        ({"fleet": True}, None, {"direction": "charge"}, 10.0),
        ({"fleet": True}, None, {"threshold": {"mw": 1.25}}, 1.25),
    ],
)
def test_a_fraction_is_one_of_the_rated_power_of_those_it_applies_to(
    applies_to: dict[str, Any], asset: str | None, more: dict[str, Any], expected_mw: float
) -> None:
    promise = {
        "id": "asked",
        "kind": "hours_at_least",
        "applies_to": applies_to,
        "threshold": {"fraction_of_rated": 0.5},
        "hours": 1,
        **more,
    }
    job = read_job({**scenario.evening_request(), "commitments": [promise]})
    assert isinstance(job, ScheduleJob)
    asked = job.commitments[0]
    assert isinstance(asked, HoursAtLeast)
    assert threshold_mw(job, asked, asset) == pytest.approx(expected_mw)
