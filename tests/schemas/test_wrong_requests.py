"""Wrong requests, each with the exact set of faults it is to be answered with."""

import pytest

from schemas.reading import read_job
from tests.schemas.documents import ABSENT, Json, edited, full, plain
from tests.schemas.refusals import faults_named
from tests.schemas.wrong_commitments import of_a_commitment
from tests.schemas.wrong_full_requests import of_a_full_request
from tests.schemas.wrong_plain_requests import HOURS_ROW, Edits, Faults, of_a_plain_request

FIRM_ROW = {"id": "f1", "kind": "firm_delivery", "applies_to": {"assets": ["b1"]}, "power_mw": 1}


@pytest.mark.parametrize(("edits", "expected"), of_a_plain_request().values(), ids=of_a_plain_request().keys())
def test_a_wrong_request_is_answered_with_exactly_its_faults(edits: Edits, expected: Faults) -> None:
    assert faults_named(edited(plain(), edits)) == expected


@pytest.mark.parametrize(("members", "expected"), of_a_commitment().values(), ids=of_a_commitment().keys())
def test_a_wrong_commitment_is_answered_with_exactly_its_faults(members: Json, expected: Faults) -> None:
    others = {
        "/fleet/assets/1": {"id": "l1", "kind": "fixed_load"},
        "/fleet/assets/2": {"id": "g1", "kind": "generator", "max_output_mw": 1},
        "/forecasts": {"l1": 1},
    }
    assert faults_named(edited(plain(), {**others, "/commitments": [{**HOURS_ROW, **members}]})) == expected


@pytest.mark.parametrize(("task", "edits", "expected"), of_a_full_request().values(), ids=of_a_full_request().keys())
def test_a_wrong_full_request_is_answered_with_exactly_its_faults(task: str, edits: Edits, expected: Faults) -> None:
    assert faults_named(edited(full(task), edits)) == expected


@pytest.mark.parametrize(
    "edits",
    [
        {"/initial/b1/stored_mwh": 8.16},
        {"/initial/b1": {"state_of_charge_percent": 102}},
        {"/initial": ABSENT, "/missing_initial": "assume_middle"},
        {"/initial": ABSENT, "/missing_initial": "hold_out"},
        {"/initial": ABSENT, "/initial_from_job_id": "j1"},
        {"/needed_by": "1999-01-01T00:00:00Z"},
        {"/commitments": [{**HOURS_ROW, "min_block_hours": 3}]},
        {"/commitments": [{**HOURS_ROW, "from": "2026-03-14T00:00:00Z", "to": "2028-03-14T00:00:00Z"}]},
        {"/commitments": [{**HOURS_ROW, "each_day": True, "between": ["22:00", "06:00"]}]},
        {"/fleet": ABSENT, "/fleet_id": "f1", "/initial": {"anything": {"on": True}}},
        {
            "/fleet/assets/0/max_starts_per_day": 1,
            "/fleet/assets/0/min_discharge_mw": 1,
            "/fleet/assets/0/min_charge_mw": 1,
        },
        {
            "/fleet/assets/0/min_run_hours": 2,
            "/fleet/assets/0/min_discharge_mw": 1,
            "/fleet/assets/0/charge_limit_mw": 0,
        },
        {"/outages": [{"asset": "b1", "kind": "planned", "from": "2027-01-01T00:07:00Z"}]},
        {"/window/price_per_mwh": [-1e9, 0, 1e9, 1]},
        {"/window/start": "2027-03-14t00:00:00.5z"},
        {"/positions": {"fleet": 1}, "/window/settled_at": "fleet"},
    ],
)
def test_what_the_contract_allows_is_read(edits: Edits) -> None:
    assert read_job(edited(plain(), edits)) is not None


def test_hours_fit_intervals_of_twenty_minutes_as_people_write_them() -> None:
    thirds = {"/window/interval": "PT20M", "/commitments": [{**HOURS_ROW, "hours": 1 / 3, "min_block_hours": 2 / 3}]}
    assert read_job(edited(plain(), thirds)) is not None
    assert faults_named(edited(plain(), {**thirds, "/commitments": [{**HOURS_ROW, "hours": 0.333}]})) == {
        ("/commitments/0/hours", "off-border")
    }


def test_a_firm_delivery_of_another_length_is_refused() -> None:
    document = edited(plain(), {"/commitments": [{**FIRM_ROW, "power_mw": [1, 2]}]})
    assert faults_named(document) == {("/commitments/0/power_mw", "wrong-length")}
