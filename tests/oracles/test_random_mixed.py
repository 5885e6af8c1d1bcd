"""Check what mixed random requests claim: the same by seed, mostly possible, every kind in them, brackets closed."""

from __future__ import annotations

from collections import Counter
from math import inf
from typing import Any

import pytest

from tests.oracles.formulation import Answer, solve
from tests.oracles.formulation_clock import Job, fractions, read_clock, series
from tests.oracles.random_mixed import mixed_request
from tests.oracles.test_oracle_rules import meters_by_hand, money_by_hand

SEEDS = range(60)


def test_same_seed_gives_the_same_mixed_request() -> None:
    assert mixed_request(7) == mixed_request(7)
    assert mixed_request(7) != mixed_request(8)


def test_most_mixed_requests_can_be_met_and_some_cannot_with_every_bracket_closed() -> None:
    answers = [solve(mixed_request(seed, assets=3, intervals=5)) for seed in SEEDS]
    outcomes = Counter(answer.outcome for answer in answers)
    assert outcomes["optimal"] + outcomes["infeasible"] == len(SEEDS)
    assert 0.65 <= outcomes["optimal"] / len(SEEDS) <= 0.85
    for answer in answers:
        if answer.margin is not None and answer.bound is not None:
            assert 0.0 <= answer.bound - answer.margin <= 1e-5 * max(1.0, abs(answer.margin))


def test_mixed_requests_hold_every_kind_and_form() -> None:
    seen: Counter[str] = Counter()
    for seed in range(300):
        job = mixed_request(seed)
        assert 2 <= len(job["fleet"]["assets"]) <= 4
        seen.update({asset["kind"] for asset in job["fleet"]["assets"]})
        for commitment in job.get("commitments", []):
            priced = any(key.startswith("shortfall") for key in commitment)
            seen.update([f"{commitment['kind']} {'priced' if priced else 'binding'}", *commitment["applies_to"]])
        seen.update(product["direction"] for product in job["window"].get("reserve_products", []))
        seen.update(f"block {product.get('block_hours')}" for product in job["window"].get("reserve_products", []))
        seen.update({f"site {key}" for site in job["fleet"]["sites"] for key in site})
        seen.update(f"fleet {key}" for key in job["fleet"])
    kinds = ("hours_at_least", "hours_at_most", "firm_delivery", "energy_at_least", "energy_at_most", "reserve_holding")
    expected = {f"{kind} {how}" for kind in kinds for how in ("priced", "binding")}
    expected |= {"storage", "generator", "renewable", "flexible_load", "fixed_load", "up", "down", "symmetric"}
    expected |= {"assets", "group", "site", "fleet", "site lot_mw", "fleet lot_mw", "block None", "block 4"}
    assert all(seen[name] >= 4 for name in expected), sorted(expected - {n for n in seen if seen[n] >= 4})


def test_uncoupled_mixed_requests_have_nothing_on_meters_of_several_assets() -> None:
    for seed in range(200):
        job = mixed_request(seed, coupled=False)
        assert not {"export_limit_mw", "import_limit_mw", "lot_mw"} & job["fleet"].keys()
        assert job["window"].get("settled_at") != "fleet"
        members = {
            site["id"]: [a for a in job["fleet"]["assets"] if a.get("site") == site["id"]]
            for site in job["fleet"]["sites"]
        }
        for commitment in job.get("commitments", []):
            whom = commitment["applies_to"]
            assert "fleet" not in whom
            assert len(whom.get("group", [""])) == 1
            assert len(members.get(whom.get("site", ""), [""])) == 1
        for site in job["fleet"]["sites"]:
            if len(members[site["id"]]) > 1:
                assert site.keys() == {"id"}
                assert "price_per_mwh" in job["window"]
                assert site["id"] not in {**job.get("limits", {}), **job.get("positions", {})}


def own_money(job: Job, asset: dict[str, Any], answer: Answer) -> float:
    """Return reserve income less fuel and starts of one asset: what its powers, states and reserve come to."""
    clock = read_clock(job["window"])
    h, count, powers = clock.hours, len(clock), answer.powers[asset["id"]]
    money: float = -h * asset.get("cost_per_mwh", 0.0) * sum(powers)
    for product in job["window"].get("reserve_products", []):
        held = answer.reserves.get(asset["id"], {}).get(product["id"], [0.0] * count)
        money += h * sum(p * mw for p, mw in zip(series(product["price_per_mw_per_hour"], count), held, strict=True))
    if asset["kind"] != "generator":
        return money
    state = job["initial"].get(asset["id"], {"on": False})
    was, hours_off = state["on"], 0.0 if state["on"] else state.get("hours_in_state", inf)
    for on, p in zip(answer.on[asset["id"]], powers, strict=True):
        if on:
            cost = asset["cost"]
            money -= h * (cost.get("constant_per_hour", 0.0) + cost["linear_per_mwh"] * p)
            money -= h * cost.get("quadratic_per_mw2h", 0.0) * p**2
            if not was and "start_costs" in asset:
                money -= [e["cost"] for e in asset["start_costs"] if e["after_hours_off"] <= hours_off + 1e-9][-1]
        was, hours_off = on, 0.0 if on else hours_off + h
    return money


def assert_output_and_reserve_fit(job: Job, asset: dict[str, Any], answer: Answer) -> None:
    """Check a generator's output with its reserve against its limits in each interval."""
    directions = {product["id"]: product["direction"] for product in job["window"].get("reserve_products", [])}
    left = fractions(job, read_clock(job["window"]), asset["id"], "discharge")
    held = answer.reserves.get(asset["id"], {})
    for t, on in enumerate(answer.on[asset["id"]]):
        up = sum(mw[t] for key, mw in held.items() if directions[key] != "down")
        down = sum(mw[t] for key, mw in held.items() if directions[key] != "up")
        output = answer.powers[asset["id"]][t]
        assert output + up <= on * asset["max_output_mw"] * left[t] + 1e-5
        assert output - down >= on * asset.get("min_output_mw", 0.0) - 1e-5


@pytest.mark.parametrize("seed", range(30))
def test_margin_is_the_money_of_powers_states_and_reserve(seed: int) -> None:
    job = mixed_request(seed, coupled=True)
    # Without what depends on more than these, which exhaustion and hand-made cases cover.
    job["commitments"] = []
    for target in job.get("targets", {}).values():
        target.pop("final_value_per_mwh", None)
    answer = solve(job)
    if answer.outcome == "infeasible":
        assert answer.margin is None
        return
    assets = job["fleet"]["assets"]
    expected = money_by_hand(job, answer.powers) + sum(own_money(job, asset, answer) for asset in assets)
    assert answer.margin == pytest.approx(expected, rel=1e-6, abs=1e-4)
    for asset in assets:
        if asset["kind"] == "generator":
            assert_output_and_reserve_fit(job, asset, answer)
    for meter, net in meters_by_hand(job, answer.powers).items():
        document = next(
            (s for s in job["fleet"]["sites"] if s["id"] == meter), job["fleet"] if meter == "fleet" else {}
        )
        lot = document.get("lot_mw")
        assert lot is None or all(abs(n / lot - round(n / lot)) <= 1e-5 for n in net)
        limits = {**document, **job.get("limits", {}).get(meter, {})}
        for key, sign in (("export_limit_mw", 1), ("import_limit_mw", -1)):
            most = series(limits.get(key, 1e9), len(net))
            assert all(sign * n <= limit + 1e-5 for n, limit in zip(net, most, strict=True))
