"""What the planner answers, refuses and hands over when time runs out."""

from datetime import timedelta
from typing import Any

import pytest

from schemas.problems import InvalidRequest, Unsupported
from schemas.reading import canonical, read_job
from schemas.schedule import Schedule, Undecided
from tests.workers.planning.jobs import NOW, answer, hours, indexed, job, planned, power_of, refused, store
from workers.planning.limits import Limits, StoppableWatch
from workers.planning.plan import plan

PAIR = [store(), store("mole-b1", energy_capacity_mwh=4.0)]


def test_assets_that_nothing_couples_are_planned_one_by_one() -> None:
    found = planned(job([10.0, 50.0], *PAIR))
    assert found.method == "per_asset"
    assert "nothing couples" in found.provenance.why_method


@pytest.mark.parametrize(
    ("coupling", "pointer"),
    [
        ({"fleet": {"export_limit_mw": 1.5}}, "/fleet/export_limit_mw"),
        ({"limits": {"fleet": {"import_limit_mw": 1.0}}}, "/limits/fleet"),
        ({"window": {"settled_at": "fleet"}}, "/window/settled_at"),
        ({"commitments": [hours({"fleet": True}, 1, 1.0)]}, "/commitments/0/applies_to"),
        ({"commitments": [hours({"group": ["quay-b1", "mole-b1"]}, 1, 1.0)]}, "/commitments/0/applies_to"),
    ],
)
def test_planning_one_by_one_is_refused_where_something_couples(coupling: dict[str, Any], pointer: str) -> None:
    with pytest.raises(InvalidRequest) as refusal:
        answer(job([10.0, 50.0], *PAIR, method="per_asset", **coupling))
    assert [fault.pointer for fault in refusal.value.faults] == [pointer]
    assert planned(job([10.0, 50.0], *PAIR, stored=1.0, **coupling)).method == "milp"


@pytest.mark.parametrize(
    ("site", "members", "pointer"),
    [
        ({"export_limit_mw": 1.5}, {}, "/fleet/sites/0/export_limit_mw"),
        ({"import_fee_per_mwh": 1.0}, {}, "/fleet/sites/0/import_fee_per_mwh"),
        ({"peak_import_charge_per_mw": 1.0}, {}, "/fleet/sites/0/peak_import_charge_per_mw"),
        ({}, {"positions": {"quay": 1.0}}, "/positions/quay"),
        ({}, {"limits": {"quay": {"export_limit_mw": 3.0}}}, "/limits/quay"),
    ],
)
def test_a_shared_site_couples_by_what_is_due_there(
    site: dict[str, Any], members: dict[str, Any], pointer: str
) -> None:
    pair = [entry | {"site": "quay"} for entry in PAIR]
    document = job([10.0, 50.0], *pair, sites=[{"id": "quay"} | site], method="per_asset", **members)
    with pytest.raises(InvalidRequest) as refusal:
        answer(document)
    assert [fault.pointer for fault in refusal.value.faults] == [pointer]


def test_a_site_of_one_store_with_a_limit_couples_nothing() -> None:
    document = job([10.0, 50.0], store(site="quay"), store("mole-b1"), sites=[{"id": "quay", "export_limit_mw": 0.5}])
    assert planned(document | {"method": "per_asset"}).sites[0].power_mw[1] == pytest.approx(0.5)


def test_coupled_sites_are_planned_part_by_part() -> None:
    sites = [{"id": "quay", "export_limit_mw": 1.5}, {"id": "mole", "export_limit_mw": 1.5}]
    fleet = [store(f"{site}-b{k}", site=site) for site in ("quay", "mole") for k in (1, 2)]
    found = planned(job([10.0, 50.0], *fleet, sites=sites))
    assert "2 independent part(s)" in found.provenance.why_method
    assert [max(site.power_mw) for site in found.sites] == pytest.approx([1.5, 1.5])


def test_what_is_not_planned_yet_is_refused_by_name() -> None:
    with pytest.raises(Unsupported) as refusal:
        answer(job([10.0], store(), method="coordinated", initial_from_job_id="yesterday"))
    assert {fault.pointer for fault in refusal.value.faults} == {"/method", "/initial_from_job_id"}


def test_no_time_left_before_it_is_needed_is_undecided_with_an_attempt_marked_as_such() -> None:
    promise = hours({"assets": ["quay-b1"]}, 1, 0.5)
    document = job([10.0, 50.0], store(), stored=1.0, commitments=[promise])
    document["needed_by"] = (NOW + timedelta(seconds=3)).isoformat()
    found = answer(document)
    assert isinstance(found, Undecided)
    assert found.margin_bound is None
    assert found.best_attempt is not None
    assert found.best_attempt.outcome == "violated"
    assert not found.best_attempt.commitments[0].met
    assert found.cautions


def test_a_plan_told_to_stop_before_it_began_has_nothing_in_hand() -> None:
    watch = StoppableWatch()
    watch.ask_stop()
    read = read_job(job([10.0, 50.0], store()))
    assert isinstance(plan(read, Limits.of(read, NOW), watch), Undecided)


def test_a_check_recomputes_every_figure_and_names_what_is_broken() -> None:
    document = job([10.0, 50.0], store(wear_cost_per_mwh=1.0), final=0.0)
    plain = {"assets": [{"id": "quay-b1", "power_mw": [-1.0, 1.0]}]}
    found = answer(document | {"task": "check", "schedule": plain})
    assert isinstance(found, Schedule)
    assert found.outcome == "feasible"
    assert found.margin == pytest.approx(39.0)
    assert found.margin_bound is None
    plain["assets"][0]["power_mw"] = [-1.0, 1.5]
    found = answer(document | {"task": "check", "schedule": plain})
    assert isinstance(found, Schedule)
    assert found.outcome == "violated"
    assert {violation.rule for violation in found.verification.violations} >= {"discharge_limit"} or any(
        "discharge_limit_mw" in violation.pointer for violation in found.verification.violations
    )


def test_a_whole_schedule_document_can_be_checked() -> None:
    document = job([10.0, 50.0], store())
    made = planned(document).model_dump(mode="json")
    checked = answer(document | {"task": "check", "schedule": made})
    assert isinstance(checked, Schedule)
    assert checked.outcome == "feasible"
    assert checked.margin == pytest.approx(made["margin"])


def test_a_store_held_out_delivers_nothing_and_its_commitments_stay_due() -> None:
    document = job([10.0, 50.0], store(standby_load_mw=0.1), missing_initial="hold_out")
    document |= {"initial": {}, "targets": {}}
    found = planned(document)
    assert power_of(found, "quay-b1") == [0.0, 0.0]
    assert found.margin == pytest.approx(-0.1 * 60.0)
    assert "/initial/quay-b1" in {entry.pointer for entry in found.assumptions}
    diagnosis = refused(document | {"commitments": [hours({"assets": ["quay-b1"]}, 1, 0.5)]})
    assert "at most 0 h" in diagnosis.summary


def test_several_impossible_commitments_are_all_named() -> None:
    promises = [hours({"assets": [asset]}, 2, 1.0, id=f"firm-{asset}") for asset in ("quay-b1", "mole-b1")]
    document = job([10.0, 50.0], *PAIR, commitments=promises)
    diagnosis = refused(document)
    named = {member.pointer for conflict in diagnosis.conflicts for member in conflict.members}
    assert {"/commitments/0", "/commitments/1"} <= named


def test_a_conflict_that_only_a_solver_sees_names_what_cannot_hold_together() -> None:
    # Each hour could be held; all of them, with the pause that minimum rest demands, cannot.
    battery = store(min_discharge_mw=0.5, min_rest_hours=2, charge_limit_mw=0.0)
    outage = {
        "asset": "quay-b1", "kind": "planned", "from": "2027-02-09T01:00:00Z", "to": "2027-02-09T02:00:00Z",
        "available_fraction": 0.0,
    }  # fmt: skip
    document = job(
        [10.0] * 3, battery, store("mole-b1"), stored=2.0, outages=[outage],
        commitments=[hours({"assets": ["quay-b1"]}, 2, 0.5), hours({"assets": ["mole-b1"]}, 1, 0.5, id="other")],
    )  # fmt: skip
    diagnosis = refused(document)
    assert "quay-b1" in diagnosis.summary
    named = {member.pointer for member in diagnosis.conflicts[0].members}
    assert named == {"/commitments/0", "/outages/0", "/fleet/assets/0/min_rest_hours"}
    assert diagnosis.conflicts[0].irreducible


def test_fixed_loads_alone_are_settled() -> None:
    load = {"id": "mill", "kind": "fixed_load"}
    found = planned(job([10.0, 20.0], load, forecasts={"mill": [1.0, 2.0]}))
    assert found.margin == pytest.approx(-50.0)
    assert found.outcome == "optimal"


def test_an_answer_names_its_request_its_versions_and_its_cautions() -> None:
    document = job([10.0, 50.0], store())
    found = planned(document)
    assert len(found.provenance.request_sha256) == 64
    assert set(found.provenance.versions) == {"hourwright", "highspy", "ortools", "pyomo"}
    assert any("Advisory" in caution for caution in found.cautions)
    again = planned(dict(reversed(document.items())))
    assert again.provenance.request_sha256 == found.provenance.request_sha256
    assert b"relative_gap" in canonical(indexed(document))


def test_the_gap_of_the_whole_holds_where_margins_cancel() -> None:
    # Two stores earn and a load pays almost as much: the parts' own gaps would be too wide for the sum.
    promises = [hours({"assets": [asset]}, 3, 0.5, id=f"firm-{asset}") for asset in ("quay-b1", "mole-b1")]
    prices = [20.0, 55.0, 31.0, 72.0, 18.0, 64.0, 90.0, 43.0]
    load = {"id": "mill", "kind": "fixed_load"}
    document = job(prices, *PAIR, load, stored=1.0, final=1.0, commitments=promises, relative_gap=0.001)
    alone = planned(document | {"forecasts": {"mill": 0.0}}).margin
    found = planned(document | {"forecasts": {"mill": alone / sum(prices)}})
    assert abs(found.margin) < 0.01 * alone
    assert found.outcome == "optimal"
    assert found.relative_gap is not None
    assert found.relative_gap <= 0.001 * 1.001
