"""Requests that use the whole contract are read, and what is written of them is the same request."""

import json
from typing import Any

import pytest
from pydantic import TypeAdapter

from schemas.job import Job
from schemas.problems import Unsupported
from schemas.reading import read_job, read_json
from schemas.support import require_supported
from tests.schemas.documents import TASKS, full, plain, with_put

ADAPTER = TypeAdapter[Job](Job)


@pytest.mark.parametrize("task", TASKS)
def test_a_full_request_survives_a_round_trip(task: str) -> None:
    job = read_job(full(task))
    written = ADAPTER.dump_json(job, by_alias=True, exclude_none=True)
    again = read_job(read_json(written))
    assert again == job
    assert ADAPTER.dump_json(again, by_alias=True, exclude_none=True) == written


@pytest.mark.parametrize("task", TASKS)
def test_what_is_written_keeps_every_member_that_was_sent(task: str) -> None:
    sent = full(task)
    written = json.loads(ADAPTER.dump_json(read_job(sent), by_alias=True, exclude_none=True))
    assert lost(sent, written) == []


def lost(sent: Any, written: Any, place: str = "") -> list[str]:
    """List what stands otherwise in the second document; a schedule to be replayed keeps its decisions only."""
    if isinstance(sent, dict):
        left_out = {"margin", "stored_mwh", "totals"} if place.startswith("/schedule") else set()
        return [
            entry
            for name, member in sent.items()
            if name not in left_out
            for entry in lost(member, written.get(name), f"{place}/{name}")
        ]
    if isinstance(sent, list):
        pairs = enumerate(zip(sent, written, strict=True))
        return [entry for position, (one, other) in pairs for entry in lost(one, other, f"{place}/{position}")]
    is_time = isinstance(sent, str) and sent[:4] == "2027" and isinstance(written, str)
    same = sent.replace("Z", "+00:00") == written if is_time else sent == written
    return [] if same else [place]


def test_a_plain_request_asks_for_nothing_that_is_not_offered() -> None:
    require_supported(read_job(plain()))


@pytest.mark.parametrize(
    ("task", "expected"),
    [
        (
            "schedule",
            {
                "/initial_from_job_id",
                "/callback",
            },
        ),
        ("commitment_costs", {"/fleet_id", "/window_id"}),
        ("reschedule", {"/task"}),
        ("sequence", {"/task"}),
    ],
)
def test_what_is_not_offered_is_refused_by_name(task: str, expected: set[str]) -> None:
    with pytest.raises(Unsupported) as refused:
        require_supported(read_job(full(task)))
    pointers = {fault.pointer for fault in refused.value.faults}
    assert {fault.code for fault in refused.value.faults} == {"unsupported"}
    assert expected <= pointers
    if task == "schedule":
        assert expected == pointers
    for fault in refused.value.faults:
        with_put(full(task), fault.pointer, None)


@pytest.mark.parametrize("method", ["coordinated"])
def test_a_method_that_is_not_offered_is_refused(method: str) -> None:
    with pytest.raises(Unsupported) as refused:
        require_supported(read_job({**plain(), "method": method}))
    assert [fault.pointer for fault in refused.value.faults] == ["/method"]
