"""The audit as a whole: order does not matter, and every figure is a function of the powers."""

from collections import Counter
from collections.abc import Sequence
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.workers.planning.audit.small_jobs import (
    Document,
    audit,
    broken,
    flexible_load,
    generator,
    job,
    load,
    outage,
    product,
    read,
    renewable,
    store,
    window,
)
from workers.planning.audit import Decision, Replay, replay

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


def mixed(order: Sequence[int]) -> Document:
    """Return a job with an asset of each kind, a commitment of each kind, reserve and lots."""
    fleet: list[Document] = [
        store("quay-b1", site="quay", wear_cost_per_mwh=3.0),
        generator(
            "quay-g1",
            site="quay",
            cost={"constant_per_hour": 5.0, "linear_per_mwh": 20.0, "quadratic_per_mw2h": 1.0},
            start_costs=[{"after_hours_off": 0.0, "cost": 40.0}, {"after_hours_off": 2.0, "cost": 90.0}],
            min_up_hours=2.0,
            min_down_hours=2.0,
            ramp_up_mw_per_hour=1.5,
            ramp_down_mw_per_hour=1.0,
        ),
        renewable("mole-pv", cost_per_mwh=1.0),
        flexible_load("quay-pumps", site="quay", min_draw_mw=0.5, interruptible=False),
        load("quay-cranes", site="quay"),
    ]
    over: Document = {"group": ["quay-b1", "quay-g1"]}
    short: Document = {"shortfall_price_per_mwh": 7.0}
    return job(
        [fleet[k] for k in order],
        window(
            [30.0, 31.0, -5.0, 60.0, 80.0, 20.0],
            reserve_products=[
                product(price_per_mw_per_hour=2.0, block_hours=2.0),
                product("both", direction="symmetric", price_per_mw_per_hour=[1.0, 2.0, 3.0, 4.0, 5.0, 6.0]),
            ],
        ),
        sites=[
            {"id": "quay", "export_limit_mw": 3.0, "import_limit_mw": 2.0, "import_fee_per_mwh": 1.0, "lot_mw": 0.5}
        ],
        fleet={"lot_mw": 0.1},
        forecasts={"quay-cranes": 0.4, "mole-pv": 1.7},
        energy_needs={"quay-pumps": [{"energy_mwh": 2.0}]},
        outages=[outage("quay-g1", 2, 4, 0.5), outage("mole-pv", 3, 4)],
        commitments=[
            {"id": "most", "kind": "hours_at_most", "applies_to": over, "threshold": {"mw": 1.0}, "hours": 3.0},
            {"id": "firm", "kind": "firm_delivery", "applies_to": over, "power_mw": 0.5, **short},
            {"id": "least", "kind": "energy_at_least", "applies_to": {"fleet": True}, "energy_mwh": 4.0},
            {"id": "cap", "kind": "energy_at_most", "applies_to": {"site": "quay"}, "energy_mwh": 2.0, **short},
            {"id": "spin", "kind": "reserve_holding", "applies_to": over, "product": "both", "power_mw": 0.5},
        ],
    )


MIXED = ("quay-b1", "quay-g1", "mole-pv", "quay-pumps")
RESERVE = st.lists(st.sampled_from([0.0, 0.5, 1.0]), min_size=HOURS, max_size=HOURS)


def mixed_decisions(powers: tuple[list[float], ...], reserves: tuple[list[float], ...]) -> dict[str, Decision]:
    held = [{"up-15": reserves[0]}, {"both": reserves[1], "up-15": reserves[0]}, {}, {}]
    return {name: Decision(power, None, reserve) for name, power, reserve in zip(MIXED, powers, held, strict=True)}


@settings(max_examples=60, deadline=None)
@given(
    powers=st.tuples(POWERS, POWERS, POWERS, POWERS),
    reserves=st.tuples(RESERVE, RESERVE),
    order=st.permutations(range(5)),
)
def test_of_all_kinds_order_does_not_matter_and_the_parts_add_up(
    powers: tuple[list[float], ...], reserves: tuple[list[float], ...], order: list[int]
) -> None:
    decisions = mixed_decisions(powers, reserves)
    one, other = (replay(read(mixed(places)), decisions) for places in (range(5), order))
    assert other.margin == pytest.approx(one.margin, abs=1e-9)
    assert other.verification.checks == one.verification.checks
    assert Counter(broken(other)) == Counter(broken(one))
    for result in (one, other):
        parts = [asset.totals.model_dump() for asset in result.assets]
        parts += [site.totals.model_dump() for site in result.sites]
        parts.append(result.fleet.totals.model_dump())
        for name, amount in result.totals.model_dump().items():
            if name != "shortfall_cost":
                assert sum(part.get(name, 0.0) for part in parts) == pytest.approx(amount, abs=1e-9)


def test_of_all_kinds_a_schedule_is_replayed_to_the_same_figures_from_its_own_decisions() -> None:
    powers = ([0.5] * 6, [1.0, 2.0, 1.5, 0.0, 0.0, 1.0], [1.7] * 6, [0.0, -1.0, -1.0, 0.0, 0.0, 0.0])
    request = read(mixed(range(5)))
    first = replay(request, mixed_decisions(powers, ([0.5] * 6, [0.0] * 6)))
    own = {asset.id: Decision(asset.power_mw, asset.on, asset.reserve_mw) for asset in first.assets}
    again = replay(request, own)
    assert (again.margin, again.assets, again.sites) == (first.margin, first.assets, first.sites)
    assert again.verification.violations == first.verification.violations
