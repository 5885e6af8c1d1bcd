"""What each further hour costs: margins that the oracle confirms, up to the most attainable and no further."""

from collections import Counter
from itertools import islice, pairwise
from types import SimpleNamespace
from typing import Any
from unittest.mock import patch

import pytest

from schemas.diagnosis import Diagnosis
from schemas.reading import read_job
from schemas.schedule import CommitmentCost, Schedule
from tests.oracles.formulation_clock import read_clock
from tests.workers.planning.jobs import NOW, answer, generator, hours, job, planned, store
from tests.workers.planning.pricing.priced_jobs import (
    GAP,
    LateAfter,
    costs,
    costs_asked,
    small,
    with_hours,
    with_hours_at_least,
)
from workers.planning import plan as planning
from workers.planning.answer import fingerprint
from workers.planning.instance import Instance
from workers.planning.limits import Limits, StoppableWatch
from workers.planning.methods import solve
from workers.planning.pricing import hours as pricing

Document = dict[str, Any]

ROUND_OFF = 1e-5
COARSE = 0.05
MIXED = 120


def figures(entries: list[CommitmentCost]) -> list[tuple[float, float]]:
    return [(entry.hours, round(entry.margin, 6)) for entry in entries]


@pytest.mark.parametrize("method", ["auto", "milp", "cp_sat"])
def test_each_hour_costs_what_enumeration_says(method: str) -> None:
    # storage_small.json: 70 free, 65 with three hours, 50 with four, five are infeasible.
    document = costs_asked(small(3, method=method, relative_gap=1e-5))
    found = answer(document)
    assert isinstance(found, Schedule)
    assert found.margin == pytest.approx(65.0, abs=1e-3)
    assert found.commitment_costs is not None
    assert [(entry.hours, round(entry.margin, 2)) for entry in found.commitment_costs] == [
        (0, 70.0),
        (1, 70.0),
        (2, 70.0),
        (3, 65.0),
        (4, 50.0),
    ]
    assert [round(entry.cost, 2) for entry in found.commitment_costs] == [0.0, 0.0, 0.0, 5.0, 20.0]
    assert found.cut_off == []
    assert found.provenance.request_sha256 == fingerprint(read_job(document))


def test_a_job_that_cannot_be_met_is_diagnosed_and_its_hours_priced_as_far_as_they_go() -> None:
    found = answer(costs_asked(small(5)))
    assert isinstance(found, Diagnosis)
    assert found.conflicts
    assert found.commitment_costs is not None
    assert figures(found.commitment_costs) == [(0, 70.0), (1, 70.0), (2, 70.0), (3, 65.0), (4, 50.0)]


def test_a_job_that_only_a_solver_refuses_is_priced_as_well() -> None:
    # Two stores that together cannot deliver in more than two hours of the four: the row is on their sum.
    document = job(
        [10.0, 50.0, 40.0, 60.0],
        store(),
        store("quay-b2"),
        commitments=[hours({"group": ["quay-b1", "quay-b2"]}, 3, 1.8)],
    )
    found = answer(costs_asked(document))
    assert isinstance(found, Diagnosis)
    assert found.commitment_costs is not None
    assert [entry.hours for entry in found.commitment_costs][-1] < 3
    for entry in found.commitment_costs:
        assert with_hours(document, 0, entry.hours).margin == pytest.approx(entry.margin, abs=1e-3)


def test_nothing_is_listed_where_not_even_no_hours_can_be_served() -> None:
    document = small(2)
    document["targets"] = {"quay-b1": {"final_stored_mwh": 2.0}}
    document["commitments"].append(hours({"assets": ["quay-b1"]}, 5, 0.5, id="more"))
    found = answer(costs_asked(document))
    assert isinstance(found, Diagnosis)
    assert found.commitment_costs == []


def test_the_most_attainable_comes_last_where_it_is_no_step() -> None:
    assert [hour for hour, _ in figures(costs(small(2), step=3.0))] == [0, 3, 4]
    assert [hour for hour, _ in figures(costs(small(2), step=5.0))] == [0, 4]
    assert [hour for hour, _ in figures(costs(small(2), step=2.0))] == [0, 2, 4]


def test_a_priced_commitment_goes_on_to_all_the_time_that_counts() -> None:
    document = small(2)
    document["commitments"][0]["shortfall_price_per_hour"] = 3.0
    entries = costs(document)
    assert [entry.hours for entry in entries] == [0, 1, 2, 3, 4, 5, 6]
    assert [entry.cost for entry in entries] == pytest.approx([0, 0, 0, 3, 6, 9, 12], abs=1e-3)


def test_all_rows_move_together_and_what_was_credited_counts() -> None:
    whom = {"assets": ["quay-b1", "quay-b2"]}
    weaker = store("quay-b2", energy_capacity_mwh=1.0)
    counted = {"commitments": {"evening": {"quay-b2": 1.0}}}
    document = job(
        [10.0, 10.0, 20.0, 50.0, 40.0, 30.0], store(), weaker, commitments=[hours(whom, 2, 0.5)], counted_before=counted
    )
    entries = costs(document)
    assert entries[-1].hours >= 3
    for entry in entries:
        assert with_hours(document, 0, entry.hours).margin == pytest.approx(entry.margin, abs=1e-3)
    beyond = with_hours(document, 0, entries[-1].hours + 1)
    assert beyond.outcome == "infeasible"


def test_a_commitment_without_an_interval_costs_nothing() -> None:
    nowhere = hours({"assets": ["quay-b1"]}, 2, 0.5, each_day=True, between=["22:00", "23:00"])
    entries = costs(job([10.0, 50.0], store(), commitments=[nowhere]))
    assert [(entry.hours, entry.cost) for entry in entries] == [(0, 0)]


def test_only_the_parts_with_rows_of_the_commitment_are_solved_again() -> None:
    assets = [store("quay-b1"), store("yard-b2"), store("mill-b3")]
    document = job([10.0, 10.0, 20.0, 50.0, 40.0, 30.0], *assets, commitments=[hours({"assets": ["yard-b2"]}, 3, 0.5)])
    solved: list[str] = []

    def noting(choice: Any, *arguments: Any, **named: Any) -> Any:
        parts: tuple[Instance, ...] = choice.parts
        solved.extend(unit.id for part in parts for unit in part.units)
        return solve(choice, *arguments, **named)

    with patch("workers.planning.pricing.hours.solve", noting):
        entries = costs(document)
    assert set(solved) == {"yard-b2"}
    assert [entry.cost for entry in entries] == pytest.approx([0, 0, 0, 5, 20], abs=1e-3)
    assert entries[0].margin == pytest.approx(3 * 70.0, abs=1e-3)


def test_a_schedule_that_delivers_enough_is_not_searched_for_again() -> None:
    searched: list[float] = []
    real = pricing._Pricing._solved

    def noting(self: Any, moved: Any, needed: float, waiting: int) -> Any:
        searched.append(needed)
        return real(self, moved, needed, waiting)

    with patch.object(pricing._Pricing, "_solved", noting):
        costs(small(0))
    # The optimum without a commitment delivers at half power or more for two hours.
    assert 1.0 not in searched
    assert 2.0 not in searched


def test_what_time_cuts_off_is_left_out_and_said() -> None:
    document = costs_asked(small(2), step=1.0)
    read = read_job(document)
    watch = LateAfter("pricing")
    found = planning.plan(read, watch.limits(), watch)
    assert isinstance(found, Schedule)
    assert found.commitment_costs is not None
    # 0 hours were priced before the time ran out, the two asked for are known anyway
    assert figures(found.commitment_costs) == [(0, 70.0), (2, 70.0)]
    assert found.cut_off == ["what more than 2 h of commitment evening cost"]


def test_a_wish_to_stop_ends_the_pricing_with_the_schedule_in_hand() -> None:
    class Stopping(StoppableWatch):
        def progress(self, phase: str, done: float) -> None:  # noqa: ARG002
            if phase == "auditing":
                self.ask_stop()

    read = read_job(costs_asked(small(2)))
    found = planning.plan(read, Limits.of(read, NOW), Stopping())
    assert isinstance(found, Schedule)
    assert found.margin == pytest.approx(70.0)
    assert found.commitment_costs == []
    assert found.cut_off == ["what any hours of commitment evening cost"]


def test_the_schedule_is_the_one_for_the_hours_asked() -> None:
    document = job(
        [10.0, 10.0, 20.0, 50.0, 40.0, 30.0],
        store(),
        generator(cost={"linear_per_mwh": 35.0}),
        fleet={"export_limit_mw": 3.0},
        commitments=[hours({"assets": ["quay-b1"]}, 3, 0.5)],
    )
    found = answer(costs_asked(document))
    assert isinstance(found, Schedule)
    assert found.margin == pytest.approx(planned(document).margin)
    assert found.commitments[0].required_hours == 3


def _confirmed(seed: int, document: Document, number: int) -> str:
    """Hold every entry against the oracle with so many hours, and the end of the list against one interval more."""
    commitment = document["commitments"][number]
    interval = read_clock(document["window"]).hours
    gap = COARSE if seed % 2 else GAP
    entries = costs(document | {"relative_gap": gap}, step=interval * (1 + seed % 3), commitment=commitment["id"])
    if not entries:
        assert with_hours(document, number, 0.0).outcome == "infeasible", f"seed {seed}"
        return "nothing to list"
    for entry in entries:
        oracle = with_hours(document, number, entry.hours)
        assert oracle.margin is not None, f"seed {seed}, {entry.hours} h"
        assert oracle.bound is not None
        assert entry.margin_bound is not None
        slack = 3 * GAP * max(1.0, abs(entry.margin)) + ROUND_OFF
        assert entry.margin <= oracle.bound + slack, f"seed {seed}, {entry.hours} h"
        assert oracle.margin <= entry.margin_bound + slack, f"seed {seed}, {entry.hours} h"
        assert gap == COARSE or entry.margin_bound - entry.margin <= slack, f"seed {seed}, {entry.hours} h"
        assert entry.cost == pytest.approx(entries[0].margin - entry.margin)
    for fewer, more in pairwise(entries):
        assert fewer.hours < more.hours
        assert fewer.margin >= more.margin
        assert fewer.margin_bound is not None
        assert more.margin_bound is not None
        assert fewer.margin_bound >= more.margin_bound
    if commitment.get("shortfall_price_per_hour") is None:
        beyond = with_hours(document, number, entries[-1].hours + interval)
        assert beyond.outcome == "infeasible", f"seed {seed}"
    return "confirmed"


def test_the_oracle_confirms_the_costs_of_random_commitments() -> None:
    seen = Counter(_confirmed(*drawn) for drawn in islice(with_hours_at_least(0), MIXED // 4))
    print(dict(seen))
    assert seen["confirmed"] >= MIXED // 8


@pytest.mark.full
def test_the_oracle_confirms_the_costs_of_many_random_commitments() -> None:
    seen = Counter(_confirmed(*drawn) for drawn in islice(with_hours_at_least(0), MIXED))
    print(dict(seen))
    assert seen["confirmed"] >= MIXED // 2


def test_more_hours_never_earn_more_nor_may_they() -> None:
    # One hour was solved to a better margin than none, and to a looser bound: each says something of the other.
    reached = {0.0: (9.0, 12.0), 1.0: (10.0, 13.0), 2.0: (8.0, 11.0)}
    known: dict[float, Any] = {
        hours: SimpleNamespace(replayed=SimpleNamespace(margin=margin), bound=bound)
        for hours, (margin, bound) in reached.items()
    }
    entries = pricing._entries(known, 1.0, 2.0)
    assert [(entry.margin, entry.margin_bound, entry.cost) for entry in entries] == [
        (10.0, 12.0, 0.0),
        (10.0, 12.0, 0.0),
        (8.0, 11.0, 2.0),
    ]
