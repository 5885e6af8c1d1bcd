"""Whole diagnoses of small requests whose answer is known by hand."""

import json
from typing import Any

import jsonpatch
import pytest

from schemas.diagnosis import Diagnosis, Repair
from schemas.reading import read_job
from schemas.schedule import Schedule
from tests.workers.planning.jobs import NOW, answer, generator, hours, job, outage, planned, refused, store
from workers.planning.limits import Limits, StoppableWatch
from workers.planning.plan import plan

EVERY_LEVER = ["commitments", "targets", "planned_outages", "initial_energy", "limits"]
B1 = "quay-b1"


def evening(hours_due: float, **more: Any) -> dict[str, Any]:
    return hours({"assets": [B1]}, hours_due, 0.5, **more)


def members(diagnosis: Diagnosis) -> list[set[str]]:
    return [{member.pointer for member in conflict.members} for conflict in diagnosis.conflicts]


def repair_of(diagnosis: Diagnosis, pointer: str) -> Repair:
    [found] = [repair for repair in diagnosis.repairs if repair.change.pointer == pointer and len(repair.changes) == 1]
    return found


def starved(**more: Any) -> dict[str, Any]:
    """Ask an empty store of 1 MW and 2 MWh, lossless, for 4 of the last 5 hours: 2 h of charging make 1 MWh too few.

    Six hours; it may charge in the first and in one of the five, and needs 2 MWh.
    """
    return job([10.0] * 6, store(), commitments=[evening(4, **{"from": "2027-02-09T01:00:00Z"})], **more)


def test_what_can_be_met_has_no_diagnosis() -> None:
    assert isinstance(answer(starved()), Schedule)


def test_a_trip_and_a_promise_are_named_with_what_is_left_and_three_ways_out() -> None:
    # out for the first four hours: two are left, of which the first has to charge
    trip = outage(B1, 0, 4) | {"kind": "planned"}
    document = starved(outages=[trip])
    found = refused(document)
    assert members(found) == [{"/commitments/0", "/outages/0"}]
    assert found.complete
    [row] = found.attainable
    assert (row.commitment, row.asset, row.required_hours, row.attainable_hours) == ("evening", B1, 4.0, 1.0)
    assert repair_of(found, "/commitments/0/hours").change.to == 1.0
    levers = {repair.change.lever for repair in found.repairs}
    assert levers == {"commitments", "planned_outages"}
    assert found.nearest_schedule is not None
    [short] = found.nearest_schedule.shortfalls
    assert (short.pointer, short.asset, short.amount, short.unit) == ("/commitments/0", B1, 3.0, "h")


def test_a_forced_outage_is_a_fact_and_no_lever() -> None:
    found = refused(starved(outages=[outage(B1, 0, 4) | {"kind": "forced"}], levers=EVERY_LEVER))
    assert {repair.change.lever for repair in found.repairs} == {"commitments"}


def test_a_target_out_of_reach_is_lowered_to_what_the_hours_left_can_charge() -> None:
    # one hour left for charging 1 MW: 1 MWh at the end instead of 1.5
    document = job([10.0] * 3, store(), outages=[outage(B1, 0, 2)], targets={B1: {"final_stored_mwh": 1.5}})
    found = refused(document)
    assert members(found) == [{f"/targets/{B1}/final_stored_mwh", "/outages/0", f"/initial/{B1}/stored_mwh"}]
    lower = repair_of(found, f"/targets/{B1}/final_stored_mwh")
    assert (lower.change.from_, lower.change.to) == (1.5, 1.0)


def test_initial_energy_and_limits_are_levers_only_when_asked_for() -> None:
    document = job([10.0] * 2, store(charge_limit_mw=0.0), stored=0.5, commitments=[evening(2)])
    assert {repair.change.lever for repair in refused(document).repairs} == {"commitments"}
    found = refused(document | {"levers": EVERY_LEVER})
    more = repair_of(found, f"/initial/{B1}/stored_mwh")
    assert (more.change.lever, more.change.to) == ("initial_energy", 1.0)
    assert isinstance(answer(jsonpatch.apply_patch(document, more.patch)), Schedule)


def test_a_limit_is_raised_as_todays_and_the_text_says_whose_it_is() -> None:
    document = job([10.0] * 2, store(site="quay"), stored=2.0, commitments=[evening(1)])
    document["fleet"]["sites"] = [{"id": "quay", "export_limit_mw": 0.3}]
    found = refused(document | {"levers": ["limits"]})
    assert members(found) == [{"/commitments/0", "/fleet/sites/0/export_limit_mw"}]
    [repair] = found.repairs
    assert repair.patch[-1] == {"op": "add", "path": "/limits/quay/export_limit_mw", "value": 0.5}
    assert "network operator" in repair.text


def test_two_promises_that_fail_for_themselves_are_cured_together() -> None:
    others = [
        evening(3, id="early", to="2027-02-09T03:00:00Z"),
        evening(3, id="late", **{"from": "2027-02-09T04:00:00Z"}),
    ]
    document = job([10.0] * 7, store(charge_limit_mw=0.1), stored=0.5, commitments=others)
    found = refused(document)
    assert all(conflict.irreducible for conflict in found.conflicts)
    assert found.repairs
    assert all(len(repair.changes) == 2 for repair in found.repairs)
    cured = jsonpatch.apply_patch(document, found.repairs[0].patch)
    assert planned(cured).margin == pytest.approx(found.repairs[0].margin, abs=0.05)


def test_of_many_promises_that_fail_in_one_part_all_are_eased_at_once() -> None:
    # behind one connection, so a single part: six stores without energy, each promised for an hour
    names = [f"b{number}" for number in range(6)]
    stores = [store(name, site="quay", charge_limit_mw=0.0) for name in names]
    promises = [hours({"assets": [name]}, 1, 0.5, id=f"firm-{name}") for name in names]
    document = job([10.0] * 2, *stores, commitments=promises)
    document["fleet"]["sites"] = [{"id": "quay", "export_limit_mw": 6.0}]
    found = refused(document)
    assert len(found.conflicts) == 6
    assert found.repairs
    assert len(found.repairs[0].changes) == 6


def test_repairs_come_best_first_and_were_planned() -> None:
    found = refused(starved(outages=[outage(B1, 0, 4) | {"kind": "planned"}]))
    margins = [repair.margin for repair in found.repairs]
    assert margins == sorted(margins, reverse=True)
    assert all(repair.verified and repair.margin_bound >= repair.margin for repair in found.repairs)


def test_a_defaults_parents_are_added_before_the_value() -> None:
    document = job(
        [10.0] * 3, store(), stored=1.0, outages=[outage(B1, 1, 3)], commitments=[evening(1, to="2027-02-09T01:00:00Z")]
    )
    del document["targets"]
    found = refused(document | {"levers": ["targets"]})
    [repair] = found.repairs
    assert [operation["path"] for operation in repair.patch] == [
        "/targets",
        f"/targets/{B1}",
        f"/targets/{B1}/final_stored_mwh",
    ]
    assert repair.change.to == 0.5
    assert isinstance(answer(jsonpatch.apply_patch(document, repair.patch)), Schedule)


def test_a_ramp_or_a_least_time_is_named_when_it_stands_in_the_way() -> None:
    # 1 MW in the second hour from nothing, 0.4 MW an hour
    slow = generator(ramp_up_mw_per_hour=0.4, min_output_mw=0.1)
    document = job([10.0] * 2, slow, commitments=[hours({"assets": ["quay-g1"]}, 2, 0.6)])
    found = refused(document)
    assert {"/commitments/0", "/fleet/assets/0/ramp_up_mw_per_hour"} in members(found)


def test_a_need_that_does_not_fit_is_named_and_leaves_no_schedule() -> None:
    load = {"id": "pumps", "kind": "flexible_load", "draw_limit_mw": 1.0}
    document = job([10.0] * 2, load, energy_needs={"pumps": [{"energy_mwh": 3.0}]})
    found = refused(document)
    assert members(found) == [{"/energy_needs/pumps/0"}]
    assert "2 MWh" in found.summary
    assert found.nearest_schedule is None
    assert found.no_nearest_schedule


def test_the_sentence_carries_what_is_needed_and_what_can_be_had() -> None:
    summary = refused(starved(outages=[outage(B1, 0, 4)])).summary
    assert "4 h" in summary
    assert "at most 2 h" in summary


def test_members_and_attainable_say_whose_row_of_which_day_it_is() -> None:
    daily = evening(3, each_day=True, between=["00:00", "02:00"])
    found = refused(job([10.0] * 3, store(), stored=2.0, commitments=[daily]))
    [member] = found.conflicts[0].members
    assert (member.asset, member.day) == (B1, "2027-02-09")
    assert (found.attainable[0].asset, found.attainable[0].day) == (B1, "2027-02-09")


def test_a_diagnosis_that_is_told_to_stop_says_what_is_not_done() -> None:
    document = read_job(starved(outages=[outage(B1, 0, 4)]))
    watch = StoppableWatch()
    watch.ask_stop()
    found = plan(document, Limits.of(document, NOW), watch)
    assert isinstance(found, Diagnosis)
    assert not found.complete
    assert found.cut_off
    assert not any(conflict.irreducible for conflict in found.conflicts)


def test_the_document_of_a_diagnosis_can_be_written_and_read_again() -> None:
    found = refused(starved(outages=[outage(B1, 0, 4) | {"kind": "planned"}]))
    text = found.model_dump_json(by_alias=True)
    assert Diagnosis.model_validate_json(text) == found
    assert json.loads(text)["repairs"][0]["change"]["from"] is not None
