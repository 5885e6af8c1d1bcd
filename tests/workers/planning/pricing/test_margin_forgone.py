"""What a row costs lies in the interval that the answer gives, for every kind of commitment and every method."""

from collections import Counter
from dataclasses import replace
from itertools import islice
from typing import Any

import pytest

from schemas.reading import read_job
from schemas.schedule import CommitmentResult, MarginForgone, Schedule
from tests.oracles.formulation import solve
from tests.workers.planning.jobs import (
    NOW,
    answer,
    fixed_load,
    flexible_load,
    generator,
    hours,
    indexed,
    job,
    planned,
    product,
    store,
)
from tests.workers.planning.pricing.priced_jobs import (
    GAP,
    LateAfter,
    explained,
    margin_without,
    mixed_with_commitments,
    small,
)
from workers.planning.instance import instance_of
from workers.planning.limits import Limits, Unwatched
from workers.planning.methods import Found, choose
from workers.planning.methods import solve as solve_parts
from workers.planning.plan import plan
from workers.planning.pricing.forgone import margins_forgone

ROUND_OFF = 1e-5
COARSE = 0.05
MIXED = 120
METHODS = ("auto", "milp", "cp_sat")


def forgone(row: CommitmentResult) -> MarginForgone:
    assert row.margin_forgone is not None
    return row.margin_forgone


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize(("needed", "gain"), [(2, 0.0), (3, 5.0), (4, 20.0)])
def test_a_row_costs_what_enumeration_says(method: str, needed: int, gain: float) -> None:
    # storage_small.json: 70 without a commitment, 65 with three hours, 50 with four.
    (row,) = explained(small(needed, method=method)).commitments
    assert forgone(row).at_least == pytest.approx(gain, abs=0.02)
    assert forgone(row).at_most == pytest.approx(gain, abs=0.1)


def test_rows_are_priced_only_when_asked() -> None:
    (row,) = planned(small(4)).commitments
    assert row.margin_forgone is None


def test_each_row_is_priced_on_its_own() -> None:
    whom = {"assets": ["quay-b1", "quay-b2"]}
    document = job([10.0, 10.0, 20.0, 50.0, 40.0, 30.0], store(), store("quay-b2"), commitments=[hours(whom, 4, 0.5)])
    found = explained(document)
    assert {row.asset for row in found.commitments} == {"quay-b1", "quay-b2"}
    for row in found.commitments:
        assert forgone(row).at_least == pytest.approx(20.0, abs=0.01)
        assert forgone(row).at_most == pytest.approx(20.0, abs=0.01)


def test_a_priced_row_costs_no_more_than_its_price() -> None:
    document = small(5)
    document["commitments"][0]["shortfall_price_per_hour"] = 3.0
    found = explained(document)
    (row,) = found.commitments
    # Without the row the margin is 70 (storage_small.json).
    assert forgone(row).at_least == pytest.approx(70.0 - found.margin, abs=0.01)
    assert 0 < forgone(row).at_most <= 5 * 3.0 + 0.01


EVERY_KIND: dict[str, dict[str, Any]] = {
    "hours_at_least": hours({"assets": ["quay-b1"]}, 4, 0.5),
    "hours_at_most": {
        "id": "evening",
        "kind": "hours_at_most",
        "applies_to": {"group": ["quay-b1", "quay-g1"]},
        "threshold": {"mw": 1.5},
        "hours": 1,
    },
    "firm_delivery": {
        "id": "evening",
        "kind": "firm_delivery",
        "applies_to": {"fleet": True},
        "power_mw": [0, 0, 0.5, 0.5, 0.5, 0.5],
    },
    "energy_at_least": {
        "id": "evening",
        "kind": "energy_at_least",
        "applies_to": {"assets": ["quay-g1"]},
        "energy_mwh": 9.0,
    },
    "energy_at_most": {
        "id": "evening",
        "kind": "energy_at_most",
        "applies_to": {"assets": ["quay-g1"]},
        "energy_mwh": 3.0,
    },
    "reserve_holding": {
        "id": "evening",
        "kind": "reserve_holding",
        "applies_to": {"fleet": True},
        "product": "up-60",
        "power_mw": 2.5,
    },
}


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("kind", EVERY_KIND)
def test_every_kind_is_priced_as_the_oracle_prices_it(kind: str, method: str) -> None:
    document = job(
        [10.0, 10.0, 20.0, 50.0, 40.0, 30.0],
        store(),
        generator(cost={"linear_per_mwh": 30.0, "constant_per_hour": 2.0}),
        flexible_load(),
        fixed_load(),
        forecasts={"quay-mill": 0.3},
        energy_needs={"quay-pumps": [{"energy_mwh": 3.0}]},
        window={"reserve_products": [product()]},
        fleet={"export_limit_mw": 4.5},
        commitments=[EVERY_KIND[kind]],
        relative_gap=1e-4 if method == "cp_sat" else GAP,
    )
    assert _agrees(document | {"method": method}) == 1


def _agrees(document: dict[str, Any]) -> int:
    """Hold every row against the oracle with and without it, whatever the gap asked for; return how many there are."""
    found = explained(document)
    with_it = solve(document, gap=GAP, time_limit=120)
    assert with_it.margin is not None
    assert with_it.bound is not None
    numbers = {commitment["id"]: number for number, commitment in enumerate(document["commitments"])}
    slack = 3 * GAP * max(1.0, abs(found.margin)) + ROUND_OFF
    for row in found.commitments:
        margin, bound = margin_without(document, (numbers[row.id], row.asset, row.day))
        gained = forgone(row)
        assert 0 <= gained.at_least <= gained.at_most
        # The oracle's own interval and ours have a point in common: both hold the truth.
        assert gained.at_least <= bound - with_it.margin + slack, row
        assert gained.at_most >= margin - with_it.bound - slack, row
    return len(found.commitments)


def _agree(count: int) -> Counter[str]:
    seen: Counter[str] = Counter()
    for seed, drawn in islice(mixed_with_commitments(0), count):
        # what bounds justify holds at any gap, and a coarse one shows whether it is margins or bounds that are taken
        document = drawn | {"relative_gap": COARSE if seed % 2 else GAP}
        if not isinstance(answer(document), Schedule):
            seen["without a schedule"] += 1
            continue
        try:
            seen["rows"] += _agrees(document)
        except AssertionError as wrong:
            raise AssertionError(f"seed {seed}: {wrong}") from wrong
        seen["planned"] += 1
    print(dict(seen))
    return seen


def test_rows_of_random_requests_are_priced_as_the_oracle_prices_them() -> None:
    assert _agree(MIXED // 3)["planned"] > MIXED // 6


def test_rows_priced_side_by_side_are_priced_alike() -> None:
    whom = {"assets": ["quay-b1", "quay-b2", "quay-b3"]}
    assets = [store("quay-b1"), store("quay-b2", energy_capacity_mwh=1.0), store("quay-b3")]
    document = job([10.0, 10.0, 20.0, 50.0, 40.0, 30.0], *assets, commitments=[hours(whom, 3, 0.3)])
    one, two = (answer(document | {"explain_commitments": True}, threads=threads) for threads in (1, 2))
    for alone, beside in zip(one.commitments, two.commitments, strict=True):
        assert forgone(alone).at_least == pytest.approx(forgone(beside).at_least, abs=1e-4)
        assert forgone(alone).at_most == pytest.approx(forgone(beside).at_most, abs=1e-4)


def test_rows_that_time_cuts_off_have_no_price_and_the_answer_says_so() -> None:
    read = read_job(small(3, explain_commitments=True))
    watch = LateAfter("auditing")
    found = plan(read, watch.limits(), watch)
    assert isinstance(found, Schedule)
    (row,) = found.commitments
    assert row.margin_forgone is None
    assert found.cut_off == ["the margin forgone for 1 of the rows of commitments"]


def test_a_dropped_row_of_a_sum_sets_its_members_free() -> None:
    # Without the row nothing couples the two stores any more; 70 each without a commitment (storage_small.json).
    together = hours({"group": ["quay-b1", "quay-b2"]}, 4, 1.0)
    document = job([10.0, 10.0, 20.0, 50.0, 40.0, 30.0], store(), store("quay-b2"), commitments=[together])
    found = explained(document)
    (row,) = found.commitments
    assert forgone(row).at_least == pytest.approx(140.0 - found.margin, abs=1e-3)
    assert forgone(row).at_most == pytest.approx(140.0 - found.margin, abs=1e-3)


@pytest.mark.full
def test_rows_of_many_random_requests_are_priced_as_the_oracle_prices_them() -> None:
    assert _agree(MIXED)["planned"] > MIXED // 2


def test_what_is_not_proven_widens_the_interval() -> None:
    # storage_small.json: 65 with three hours, 70 without the row; here 68 is all that is proven with it.
    asked = indexed(small(3))
    choice, limits = choose(instance_of(asked), "auto"), Limits.of(asked, NOW)
    found = solve_parts(choice, limits, Unwatched(), seed=0)
    vague = Found(choice, tuple(replace(solution, bound=68.0) for solution in found.solutions))
    (gain,) = margins_forgone(vague, limits, Unwatched(), seed=0).values()
    assert gain.at_least == pytest.approx(2.0)
    assert gain.at_most == pytest.approx(5.0)
