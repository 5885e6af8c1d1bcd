"""How a refusal reads: short, whole, with a hint, and the same after a journey between processes."""

import json
import pickle
from typing import Any

import pytest

from schemas.problems import PROBLEM_TYPES, InvalidRequest, MalformedJson, Unsupported
from schemas.reading import read_job, read_json
from tests.schemas.documents import Json, edited, plain
from tests.schemas.refusals import faults_named


def test_a_misspelt_member_comes_with_the_nearest_name_of_its_own_object() -> None:
    with pytest.raises(InvalidRequest) as refused:
        read_job(edited(plain(), {"/fleet/assets/0/min_stord_mwh": 1, "/window/currancy": "EUR", "/zzz": 1}))
    details = {fault.pointer: fault.detail for fault in refused.value.faults}
    assert "did you mean `min_stored_mwh`" in details["/fleet/assets/0/min_stord_mwh"]
    assert "did you mean `currency`" in details["/window/currancy"]
    assert "did you mean" not in details["/zzz"]


def test_ten_thousand_faults_make_a_short_answer() -> None:
    assets = [{"id": f"x{number}", "kind": "storage", "charge_limit_mw": "y" * 200} for number in range(10_000)]
    with pytest.raises(InvalidRequest) as refused:
        read_job(edited(plain(), {"/fleet/assets": assets}))
    problem = refused.value.problem()
    text = problem.model_dump_json()
    assert len(problem.errors) == 100
    assert problem.errors_truncated
    assert len(text) < 64 * 1024
    assert "y" * 101 not in text


def test_no_more_faults_are_sought_than_an_answer_needs() -> None:
    """Millions of faults would cost gigabytes: past the budget the rest of a document is passed over."""
    row: Json = {"kind": "hours_at_least", **{f"m{number}": 1 for number in range(50)}}
    with pytest.raises(InvalidRequest) as refused:
        read_job(edited(plain(), {"/commitments": [row] * 20_000}))
    assert 100 < len(refused.value.faults) <= 1_000


def test_an_object_with_a_thousand_unknown_members_is_one_fault() -> None:
    document = edited(plain(), {"/fleet/assets/0": {"kind": "storage", **{f"m{number}": 1 for number in range(1_000)}}})
    assert faults_named(document) == {("/fleet/assets/0", "too-large")}


@pytest.mark.parametrize(
    ("refusal", "word"),
    [(MalformedJson, "malformed-json"), (InvalidRequest, "invalid-request"), (Unsupported, "unsupported")],
)
def test_a_refusal_survives_pickling_and_writes_a_problem(refusal: Any, word: Any) -> None:
    with pytest.raises(InvalidRequest) as caught:
        read_job(edited(plain(), {"/fleet_id": "f"}))
    error = refusal(caught.value.faults)
    again = pickle.loads(pickle.dumps(error))  # noqa: S301 - our own bytes, to show that a worker's error arrives whole
    assert again.faults == error.faults
    written = json.loads(error.problem().model_dump_json())
    assert written["type"] == f"/problems/{word}"
    assert (written["status"], written["title"]) == PROBLEM_TYPES[word]
    assert written["errors"] == [
        {"pointer": "/fleet_id", "code": "exactly-one", "detail": error.faults[0].detail},
    ]
    assert written["detail"] == error.faults[0].detail
    assert "/fleet_id" in str(error)


def test_what_was_read_from_bytes_is_judged_alike() -> None:
    body = json.dumps(edited(plain(), {"/initial/b1/stored_mwh": -1})).encode()
    assert faults_named(read_json(body)) == {("/initial/b1/stored_mwh", "out-of-range")}
