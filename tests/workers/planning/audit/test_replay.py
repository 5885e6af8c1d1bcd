"""The audit as a whole: order does not matter, and every figure is a function of the powers."""

from collections import Counter
from collections.abc import Sequence
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.workers.planning.audit.small_jobs import Document, audit, job, load, store, window
from workers.planning.audit import Replay

NAMES = ("quay-b1", "quay-b2", "mole-b1", "mole-b2")
HOURS = 6
POWERS = st.lists(
    st.sampled_from([0.0, 0.5, 1.0, 1.7, 2.0, 2.5, -0.4, -1.0, -2.0, -3.0]), min_size=HOURS, max_size=HOURS
)


def assets() -> list[Document]:
    run_times = {"min_discharge_mw": 0.5, "min_charge_mw": 0.5, "min_run_hours": 2, "min_rest_hours": 1}
    return [
        store("quay-b1", site="quay", wear_cost_per_mwh=3.0, max_cycles_per_day=0.3, **run_times),
        store("quay-b2", site="quay", standby_load_mw=0.1, ramp_mw_per_hour=1.5, max_starts_per_day=1, **run_times),
        store("mole-b1", charge_efficiency=0.9, discharge_efficiency=0.9, self_discharge_per_hour=0.01),
        store("mole-b2", min_stored_mwh=2.0, max_stored_mwh=8.0),
        load("quay-cranes", site="quay"),
    ]


def document(order: Sequence[int], settled_at: str) -> Document:
    fleet = assets()
    row = {"kind": "hours_at_least", "threshold": {"mw": 1.0}, "hours": 2.0}
    return job(
        [fleet[k] for k in order],
        window([30.0, 31.0, -5.0, 60.0, 80.0, 20.0], settled_at=settled_at),
        sites=[{"id": "quay", "export_limit_mw": 2.0, "import_fee_per_mwh": 1.0, "peak_import_charge_per_mw": 10.0}],
        fleet={"import_limit_mw": 3.0},
        forecasts={"quay-cranes": 0.4},
        outages=[{"asset": "mole-b1", "kind": "forced", "from": "2027-03-10T02:30:00Z", "to": "2027-03-10T04:00:00Z"}],
        commitments=[
            {"id": "each", "applies_to": {"assets": ["mole-b1", "quay-b1"]}, **row},
            {"id": "sum", "applies_to": {"group": ["quay-b1", "quay-b2"]}, **row, "min_block_hours": 2.0},
            {"id": "site", "applies_to": {"site": "quay"}, **row, "shortfall_price_per_hour": 7.0},
        ],
    )


def found(result: Replay, order: Sequence[int]) -> Counter[Any]:
    """Return what was found, with assets named by themselves instead of by their place."""
    fleet = assets()
    tokens = []
    for violation in result.verification.violations:
        path = violation.pointer.split("/")
        if path[1:3] == ["fleet", "assets"]:
            path[3] = fleet[order[int(path[3])]]["id"]
        tokens.append((violation.rule, "/".join(path), violation.interval_start, violation.text))
    return Counter(tokens)


@settings(max_examples=60, deadline=None)
@given(
    powers=st.tuples(POWERS, POWERS, POWERS, POWERS),
    order=st.permutations(range(5)),
    settled_at=st.sampled_from(["site", "fleet"]),
)
def test_the_order_of_the_assets_does_not_matter(
    powers: tuple[list[float], ...], order: list[int], settled_at: str
) -> None:
    decided = dict(zip(NAMES, powers, strict=True))
    plain = range(5)
    one = audit(document(plain, settled_at), decided)
    other = audit(document(order, settled_at), decided)
    assert other.margin == pytest.approx(one.margin, abs=1e-9)
    assert other.verification.checks == one.verification.checks
    assert found(other, order) == found(one, plain)


@settings(max_examples=60, deadline=None)
@given(powers=st.tuples(POWERS, POWERS, POWERS, POWERS), settled_at=st.sampled_from(["site", "fleet"]))
def test_the_parts_add_up_to_the_margin(powers: tuple[list[float], ...], settled_at: str) -> None:
    result = audit(document(range(5), settled_at), dict(zip(NAMES, powers, strict=True)))
    income = {"sales": 1, "reserve_income": 1, "final_energy_value": 1}
    parts = [asset.totals.model_dump() for asset in result.assets]
    parts += [site.totals.model_dump() for site in result.sites]
    parts.append(result.fleet.totals.model_dump())
    margin = sum(income.get(name, -1) * amount for part in parts for name, amount in part.items())
    assert result.margin == pytest.approx(margin - result.totals.shortfall_cost, abs=1e-9)


@settings(max_examples=60, deadline=None)
@given(powers=POWERS, more=st.sampled_from([0.5, 3.0, 100.0]))
def test_a_larger_store_breaks_no_more(powers: list[float], more: float) -> None:
    # With nothing but limits of power and energy, all that was held by a smaller store is held by a larger one.
    sizes: tuple[Document, Document] = (
        {},
        {"energy_capacity_mwh": 10.0 + more, "discharge_limit_mw": 2.0 + more, "charge_limit_mw": 2.0 + more},
    )
    small, large = (audit(job([store(**size)], window([0.0] * HOURS)), {"quay-b1": powers}) for size in sizes)
    broken_by = [
        Counter((v.rule, v.interval_start) for v in result.verification.violations) for result in (small, large)
    ]
    assert broken_by[1] <= broken_by[0]


def test_a_schedule_is_replayed_to_the_same_figures_from_its_own_powers() -> None:
    powers = {
        "quay-b1": [0.0, 0.0, -1.0, -1.0, 1.0, 1.0],
        "quay-b2": [0.0] * 6,
        "mole-b1": [1.0, 1.0, 0.0, 0.0, 1.0, -0.5],
        "mole-b2": [0.0] * 6,
    }
    first = audit(document(range(5), "site"), powers)
    again = audit(document(range(5), "site"), {asset.id: asset.power_mw for asset in first.assets})
    assert again.margin == first.margin
    assert again.assets == first.assets
    assert again.sites == first.sites
    assert again.verification.violations == first.verification.violations
