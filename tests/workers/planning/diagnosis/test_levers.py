"""Levers move over what a person would write, and what they do to the job is what they write into the request."""

from typing import Any

import jsonpatch
import pytest

from schemas.job import ScheduleJob
from schemas.json_patch import patched
from schemas.reading import canonical, read_job
from tests.workers.planning.jobs import generator, hours, job, outage, product, renewable, store
from workers.planning.diagnosis.cures import least_step
from workers.planning.diagnosis.levers import levers_of
from workers.planning.diagnosis.levers.lever import Grid, Lever
from workers.planning.diagnosis.patches import document_of, patch_of
from workers.planning.diagnosis.scope import Question, whole
from workers.planning.instance import instance_of

EVERY_LEVER = ["commitments", "targets", "planned_outages", "initial_energy", "limits"]


@pytest.mark.parametrize(
    ("grid", "steps", "numbers"),
    [
        (Grid(8.0, 0.0, 0.25), 32, [8.0, 7.75, 7.5]),
        (Grid(1.955, 0.0), 196, [1.955, 1.95, 1.94]),
        (Grid(1.95, 0.0), 195, [1.95, 1.94, 1.93]),
        (Grid(0.333, 2.0), 167, [0.333, 0.34, 0.35]),
        (Grid(0.5, 0.505), 1, [0.5, 0.505]),
        (Grid(3.0, 3.0), 0, [3.0]),
    ],
)
def test_a_grid_goes_outwards_over_multiples_of_its_step_and_not_beyond_its_end(
    grid: Grid, steps: int, numbers: list[float]
) -> None:
    assert grid.steps == steps
    assert [grid.at(step) for step in range(len(numbers))] == pytest.approx(numbers)
    assert grid.at(steps) == pytest.approx(grid.end)


@pytest.mark.parametrize("least", [1, 2, 7, 63, 99, 100])
@pytest.mark.parametrize("near", [None, 1, 7, 98, 99])
def test_the_least_step_is_found_from_any_guess_and_seldom_asked_for(least: int, near: int | None) -> None:
    asked: list[int] = []

    def cures(step: int) -> bool:
        asked.append(step)
        return step >= least

    assert least_step(cures, 0, 100, near) == least
    assert len(asked) <= 14


def everything() -> ScheduleJob:
    """Return a job in which every kind of lever has something to move."""
    planned = outage("quay-b1", 1, 3, 0.25) | {"kind": "planned"}
    one_way = {name: value for name, value in outage("quay-b1", 4, 5).items() if name != "available_fraction"}
    commitments: list[dict[str, Any]] = [
        hours({"assets": ["quay-b1"]}, 3, 0.555, id="c0"),
        hours({"assets": ["quay-b1"]}, 2, 0.5, id="c1") | {"threshold": {"fraction_of_rated": 0.5}},
        hours({"assets": ["quay-g1"]}, 1, 2.0, id="c2", kind="hours_at_most"),
        {"id": "c3", "kind": "energy_at_least", "applies_to": {"assets": ["quay-b1"]}, "energy_mwh": 1.234},
        {"id": "c4", "kind": "energy_at_most", "applies_to": {"assets": ["quay-g1"]}, "energy_mwh": 1.0},
        {"id": "c5", "kind": "firm_delivery", "applies_to": {"fleet": True}, "power_mw": [0.0, 1.0, 2.0, 0.5, 0.0]},
        {"id": "c6", "kind": "reserve_holding", "applies_to": {"fleet": True}, "product": "up-60", "power_mw": 0.5},
    ]
    document = job(
        [10.0] * 5,
        store(site="quay"),
        generator(),
        renewable(),
        stored=1.0,
        final=0.7,
        forecasts={"quay-pv": 1.0},
        sites=[{"id": "quay", "export_limit_mw": 1.0, "import_limit_mw": 1.5}],
        limits={"quay": {"import_limit_mw": [1.0, 0.5, 1.0, 1.0, 1.0]}},
        outages=[planned, one_way | {"kind": "planned", "available_charge_fraction": 0.1}],
        commitments=commitments,
        levers=EVERY_LEVER,
        window={"reserve_products": [product()]},
    )
    read = read_job(document)
    assert isinstance(read, ScheduleJob)
    return read


def levers() -> list[Lever]:
    read = everything()
    scope = whole(Question(read, instance_of(read)))
    return levers_of(scope, scope.elements)


def test_every_kind_of_lever_is_there() -> None:
    found = {(lever.name, lever.pointer.split("/")[-1]) for lever in levers()}
    assert found == {
        ("commitments", "hours"),
        ("commitments", "mw"),
        ("commitments", "fraction_of_rated"),
        ("commitments", "energy_mwh"),
        ("commitments", "power_mw"),
        ("targets", "final_stored_mwh"),
        ("planned_outages", "from"),
        ("planned_outages", "to"),
        ("planned_outages", "available_fraction"),
        ("planned_outages", "available_charge_fraction"),
        ("initial_energy", "stored_mwh"),
        ("limits", "export_limit_mw"),
        ("limits", "import_limit_mw"),
    }


def test_what_a_lever_does_to_the_job_is_what_it_writes_into_the_request() -> None:
    read = everything()
    document = document_of(read)
    for lever in levers():
        for step in sorted({1, 2, lever.steps // 2, lever.steps} & set(range(1, lever.steps + 1))):
            patch = patch_of(document, lever.values(step))
            by_library = jsonpatch.apply_patch(document, patch)
            assert by_library == patched(document, patch), lever.pointer
            done = lever.apply(read, step)
            assert canonical(read_job(by_library)) == canonical(read_job(document_of(done))), lever.pointer
            assert by_library != document, f"{lever.pointer}: step {step} changes nothing"


def test_levers_that_a_job_does_not_allow_are_not_offered() -> None:
    read = everything().model_copy(update={"levers": ["targets"]})
    scope = whole(Question(read, instance_of(read)))
    assert {lever.name for lever in levers_of(scope, scope.elements)} == {"targets"}


def test_a_patch_takes_a_member_away_and_adds_missing_parents() -> None:
    document = {"initial": {"b1": {"state_of_charge_percent": 40.0}}}
    values = {
        "/initial/b1/stored_mwh": 2.0,
        "/initial/b1/state_of_charge_percent": None,
        "/targets/b1/final_stored_mwh": 1,
    }
    patch = patch_of(document, values)
    assert [(operation["op"], operation["path"]) for operation in patch] == [
        ("add", "/initial/b1/stored_mwh"),
        ("remove", "/initial/b1/state_of_charge_percent"),
        ("add", "/targets"),
        ("add", "/targets/b1"),
        ("add", "/targets/b1/final_stored_mwh"),
    ]
    assert jsonpatch.apply_patch(document, patch) == {
        "initial": {"b1": {"stored_mwh": 2.0}},
        "targets": {"b1": {"final_stored_mwh": 1}},
    }
    assert document == {"initial": {"b1": {"state_of_charge_percent": 40.0}}}
