"""What a row costs lies in the interval that the answer gives, for every kind of commitment and every method."""

from collections import Counter
from itertools import islice
from typing import Any

import pytest

from schemas.schedule import CommitmentResult, MarginForgone, Schedule
from tests.oracles.formulation import solve
from tests.workers.planning.jobs import (
    answer,
    fixed_load,
    flexible_load,
    generator,
    hours,
    job,
    planned,
    product,
    store,
)
from tests.workers.planning.pricing.priced_jobs import (
    GAP,
    explained,
    margin_without,
    mixed_with_commitments,
    small,
)

ROUND_OFF = 1e-5
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
    gap = 1e-4 if method == "cp_sat" else GAP
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
        relative_gap=gap,
    )
    _agrees(document | {"method": method}, gap)


def _agrees(document: dict[str, Any], gap: float) -> int:
    """Hold every row against the oracle with and without it; return how many there are."""
    found = explained(document)
    with_it = solve(document, gap=GAP, time_limit=120)
    assert with_it.margin is not None
    assert with_it.bound is not None
    numbers = {commitment["id"]: number for number, commitment in enumerate(document["commitments"])}
    slack = 3 * gap * max(1.0, abs(found.margin)) + ROUND_OFF
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
    for seed, document in islice(mixed_with_commitments(0), count):
        if not isinstance(answer(document), Schedule):
            seen["without a schedule"] += 1
            continue
        try:
            seen["rows"] += _agrees(document, GAP)
        except AssertionError as wrong:
            raise AssertionError(f"seed {seed}: {wrong}") from wrong
        seen["planned"] += 1
    print(dict(seen))
    return seen


def test_rows_of_random_requests_are_priced_as_the_oracle_prices_them() -> None:
    assert _agree(MIXED // 3)["planned"] > MIXED // 6


@pytest.mark.full
def test_rows_of_many_random_requests_are_priced_as_the_oracle_prices_them() -> None:
    assert _agree(MIXED)["planned"] > MIXED // 2
