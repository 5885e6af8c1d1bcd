"""Check the oracle's rules against exhaustion, its money against arithmetic, and what random requests claim.

The stores enumerated here can only run at their limits (minimum power = limit), so three levels hold every schedule.
"""

from __future__ import annotations

import itertools
import random
from datetime import date
from typing import Any

import pytest

from tests.oracles.classic import enumerate_best
from tests.oracles.formulation import solve
from tests.oracles.formulation_clock import Job, Span, fractions, given, read_clock, series, spans
from tests.oracles.random_requests import request

HOURS = 7
# Hourly intervals from 21:00 local time: three on the first day, four on the second.
DAY = (0, 0, 0, 1, 1, 1, 1)
STARTS = [f"2027-02-09T{hour}:00:00+01:00" for hour in (21, 22, 23)]
STARTS += [f"2027-02-10T{hour:02d}:00:00+01:00" for hour in range(5)]
LONG = 99


def on_off_job(seed: int) -> Job:
    """Return a job of one store that charges and discharges at its limits or not at all."""
    draw = random.Random(seed)
    asset: dict[str, Any] = {"id": "kiln-b1", "kind": "storage", "energy_capacity_mwh": draw.choice([2.5, 4.0, 6.0])}
    for direction in ("charge", "discharge"):
        limit = draw.choice([1.0, 1.5])
        asset |= {f"{direction}_limit_mw": limit, f"min_{direction}_mw": limit}
        asset[f"{direction}_efficiency"] = draw.choice([1.0, 0.9])
    asset |= {"wear_cost_per_mwh": draw.choice([0.0, 4.0]), "self_discharge_per_hour": draw.choice([0.0, 0.01])}
    asset |= {"min_stored_mwh": draw.choice([0.0, 0.3]), "standby_load_mw": draw.choice([0.0, 0.05])}
    optional = {
        "min_run_hours": draw.randint(1, 3),
        "min_rest_hours": draw.randint(1, 2),
        "max_starts_per_day": draw.randint(1, 2),
        "max_cycles_per_day": draw.choice([0.4, 0.7]),
        "ramp_mw_per_hour": draw.choice([1.2, 2.0]),
    }
    asset |= {key: value for key, value in optional.items() if draw.random() < 0.5}
    # Some stores begin below their minimum, some up to 2 % above their capacity.
    share = draw.choice([draw.uniform(0.2, 1.015), draw.uniform(0.0, 0.1)])
    state: dict[str, Any] = {"stored_mwh": round(asset["energy_capacity_mwh"] * share, 2)}
    power = draw.choice([0.0, 0.0, asset["discharge_limit_mw"], -asset["charge_limit_mw"]])
    state |= {"power_mw": power, "hours_in_state": draw.randint(1, 3)}
    job: Job = {
        "fleet": {"assets": [asset]},
        "window": {
            "start": STARTS[0],
            "interval": "PT60M",
            "timezone": "Europe/Berlin",
            "price_per_mwh": [draw.randint(-10, 90) for _ in range(HOURS)],
        },
        "initial": {"kiln-b1": state},
        "targets": {
            "kiln-b1": {"final_stored_mwh": draw.choice([0.05, 0.3]), "final_value_per_mwh": draw.choice([0.0, 25.0])}
        },
    }
    if draw.random() < 0.4:
        first = draw.randrange(HOURS)
        job["outages"] = [{"asset": "kiln-b1", "kind": "forced", "from": STARTS[first], "available_fraction": 0.5}]
        job["outages"][0]["to"] = STARTS[min(HOURS, first + 2)]
    job["commitments"] = [_commitment(draw)]
    counted = {"assets": {"kiln-b1": {"starts": 1, "discharged_mwh": 0.5}}, "commitments": {"firm-1": 1}}
    if draw.random() < 0.5:
        job["counted_before"] = counted
    return job


def _commitment(draw: random.Random) -> dict[str, Any]:
    commitment: dict[str, Any] = {"id": "firm-1", "kind": "hours_at_least", "applies_to": {"assets": ["kiln-b1"]}}
    # 0.9 MW and its headroom are just what a limit of 1 MW allows.
    threshold = draw.choice([{"fraction_of_rated": 0.5}, {"mw": 0.9}])
    commitment |= {"threshold": threshold, "headroom_mw": 0.1, "hours": draw.randint(1, 3)}
    commitment |= {"each_day": draw.random() < 0.4, "direction": draw.choice(["discharge", "discharge", "charge"])}
    if draw.random() < 0.5:
        commitment["min_block_hours"] = draw.randint(2, 3)
    if draw.random() < 0.4:
        first = draw.randrange(HOURS)
        commitment["excused"] = [{"from": STARTS[first], "to": STARTS[first + 1]}]
    if draw.random() < 0.5:
        commitment["shortfall_price_per_hour"] = draw.choice([5.0, 40.0])
    return commitment


def margin_by_hand(job: Job, powers: tuple[float, ...]) -> float | None:
    """Return the margin of a series of hourly powers, None where it breaks a rule; told apart by replay, no model."""
    asset = job["fleet"]["assets"][0]
    earned = energy_by_hand(job, asset, powers)
    shortfall = shortfall_by_hand(job, powers)
    if earned is None or shortfall is None or not runs_hold(job, asset, powers):
        return None
    standby = asset["standby_load_mw"]
    sold: float = sum(price * (p - standby) for price, p in zip(job["window"]["price_per_mwh"], powers, strict=True))
    return sold + earned - shortfall


def out(job: Job) -> set[int]:
    """Return the hours in which an outage lowers the store, here always below its minimum powers."""
    return {
        t for o in job.get("outages", []) for t in range(HOURS) if STARTS.index(o["from"]) <= t < STARTS.index(o["to"])
    }


def energy_by_hand(job: Job, asset: dict[str, Any], powers: tuple[float, ...]) -> float | None:
    """Return final energy value less wear, None where energy, cycles, ramps or an outage are broken."""
    initial, target = job["initial"]["kiln-b1"], job["targets"]["kiln-b1"]
    kept, low, high = 1 - asset["self_discharge_per_hour"], asset["min_stored_mwh"], asset["energy_capacity_mwh"]
    stored = idle = min(initial["stored_mwh"], high)
    starts_low = stored < low
    used = [given(given(job.get("counted_before"), "assets"), "kiln-b1", {}).get("discharged_mwh", 0.0), 0.0]
    before = initial["power_mw"]
    for t, p in enumerate(powers):
        idle *= kept
        gain = -p * asset["charge_efficiency"] if p < 0 else -p / asset["discharge_efficiency"]
        stored = stored * kept + gain
        if not (min(low, idle) if starts_low else low) - 1e-9 <= stored <= high + 1e-9:
            return None
        if p != 0 and t in out(job):
            return None
        if t not in out(job) and abs(p - before) > asset.get("ramp_mw_per_hour", LONG) + 1e-9:
            return None
        used[DAY[t]] += max(p, 0.0)
        before = p
    # What was used up before the window leaves nothing, but is no fault of this schedule.
    allowed = asset.get("max_cycles_per_day", LONG) * high
    discharged = sum(max(p, 0.0) for p in powers)
    if stored < target["final_stored_mwh"] - 1e-9 or max(used) > allowed + 1e-9:
        return None
    return float(
        (stored - target["final_stored_mwh"]) * target["final_value_per_mwh"] - discharged * asset["wear_cost_per_mwh"]
    )


def runs_hold(job: Job, asset: dict[str, Any], powers: tuple[float, ...]) -> bool:
    """Tell whether run, rest and start limits hold, the hours before the window written in front of it."""
    initial = job["initial"]["kiln-b1"]
    past = initial["hours_in_state"]
    signs = [_sign(initial["power_mw"])] * past + [_sign(p) for p in powers]
    counted = given(given(job.get("counted_before"), "assets"), "kiln-b1", {}).get("starts", 0)
    starts, begun, rested = [counted, 0], 0, LONG
    for sign, stretch in itertools.groupby(signs):
        length = len(list(stretch))
        end = begun + length
        if sign == 0:
            rested = length
        else:
            tripped = end - past in out(job)
            if end < len(signs) and length < asset.get("min_run_hours", 0) and not tripped:
                return False
            if begun > 0 and rested < asset.get("min_rest_hours", 0):
                return False
            if begun >= past:
                starts[DAY[begun - past]] += 1
            rested = 0
        begun = end
    most = asset.get("max_starts_per_day", LONG)
    return all(count <= most for count in starts)


def _sign(power: float) -> int:
    return (power > 0) - (power < 0)


def shortfall_by_hand(job: Job, powers: tuple[float, ...]) -> float | None:
    """Return what the commitment's shortfall costs, None where it is binding and falls short."""
    commitment, asset = job["commitments"][0], job["fleet"]["assets"][0]
    direction = commitment["direction"]
    sign = 1 if direction == "discharge" else -1
    asked = commitment["threshold"].get("mw", 0.5 * asset[f"{direction}_limit_mw"]) + 0.1
    excused = {STARTS.index(span["from"]) for span in commitment.get("excused", [])}
    credit = given(job.get("counted_before"), "commitments", {}).get("firm-1", 0)
    cost = 0.0
    for _, row in itertools.groupby(range(HOURS), key=lambda t: DAY[t] if commitment["each_day"] else 0):
        flags = [sign * powers[t] >= asked - 1e-6 or t in excused for t in row]
        blocks = [len(list(block)) for flag, block in itertools.groupby(flags) if flag]
        delivered = sum(block for block in blocks if block >= commitment.get("min_block_hours", 0)) + credit
        short = max(0, commitment["hours"] - delivered)
        credit = 0
        if short and "shortfall_price_per_hour" not in commitment:
            return None
        cost += short * commitment.get("shortfall_price_per_hour", 0.0)
    return cost


@pytest.mark.parametrize("seed", range(100))
def test_oracle_agrees_with_exhaustion_on_stores_that_run_at_their_limits(seed: int) -> None:
    job = on_off_job(seed)
    asset = job["fleet"]["assets"][0]
    levels = (-asset["charge_limit_mw"], 0.0, asset["discharge_limit_mw"])
    expected = enumerate_best(levels, HOURS, lambda powers: margin_by_hand(job, powers))
    answer = solve(job, gap=1e-9)
    assert (answer.outcome == "infeasible") == (expected is None)
    assert answer.margin == (None if expected is None else pytest.approx(expected, abs=1e-5))


def test_exhausted_cases_hold_both_outcomes() -> None:
    outcomes = [solve(on_off_job(seed)).outcome for seed in range(100)]
    assert set(outcomes) == {"optimal", "infeasible"}
    assert outcomes.count("optimal") >= 30


def meters_by_hand(job: Job, powers: dict[str, list[float]]) -> dict[str, list[float]]:
    """Return what each meter and the fleet read, MW."""
    nets: dict[str, list[float]] = {"fleet": [0.0] * len(next(iter(powers.values())))}
    for site in given(job["fleet"], "sites", []):
        nets[site["id"]] = [0.0] * len(nets["fleet"])
    for asset in job["fleet"]["assets"]:
        for meter in ("fleet", asset.get("site", asset["id"])):
            net = nets.setdefault(meter, [0.0] * len(nets["fleet"]))
            nets[meter] = [
                n + p - asset.get("standby_load_mw", 0.0) for n, p in zip(net, powers[asset["id"]], strict=True)
            ]
    return nets


def money_by_hand(job: Job, powers: dict[str, list[float]]) -> float:
    """Return settlement less fees, peak charges and wear: the margin but for final energy and shortfall."""
    clock, window, nets = read_clock(job["window"]), job["window"], meters_by_hand(job, powers)
    count, h = len(clock), clock.hours
    buy = series(given(window, "buy_price_per_mwh", given(window, "price_per_mwh")), count)
    sell = series(given(window, "sell_price_per_mwh", given(window, "price_per_mwh")), count)
    by_fleet = given(window, "settled_at", "site") == "fleet"
    money = 0.0
    for meter, net in nets.items():
        if (meter == "fleet") == by_fleet:
            position = series(given(job.get("positions"), meter, 0.0), count)
            above = [n - sold for n, sold in zip(net, position, strict=True)]
            money += sum(h * (sell[t] * max(a, 0.0) - buy[t] * max(-a, 0.0)) for t, a in enumerate(above))
    for site in given(job["fleet"], "sites", []):
        net = nets[site["id"]]
        money -= h * site.get("import_fee_per_mwh", 0.0) * sum(max(-n, 0.0) for n in net)
        money -= h * site.get("export_fee_per_mwh", 0.0) * sum(max(n, 0.0) for n in net)
        peak = given(given(given(job, "counted_before"), "sites"), site["id"], {}).get("peak_import_mw", 0.0)
        money -= site.get("peak_import_charge_per_mw", 0.0) * max(0.0, max(-n for n in net) - peak)
    for asset in job["fleet"]["assets"]:
        money -= h * asset.get("wear_cost_per_mwh", 0.0) * sum(max(p, 0.0) for p in powers[asset["id"]])
    return money


@pytest.mark.parametrize("seed", range(24))
def test_margin_is_the_money_its_powers_earn(seed: int) -> None:
    job = request(seed, assets=3, intervals=8, coupled=True)
    # Without what depends on more than powers, which exhaustion above covers.
    job["commitments"] = []
    for target in job.get("targets", {}).values():
        target.pop("final_value_per_mwh", None)
    answer = solve(job)
    if answer.outcome == "infeasible":
        assert answer.margin is None
        return
    assert answer.margin == pytest.approx(money_by_hand(job, answer.powers), rel=1e-6, abs=1e-4)
    for meter, net in meters_by_hand(job, answer.powers).items():
        document = next((s for s in given(job["fleet"], "sites", []) if s["id"] == meter), job["fleet"])
        limits = {
            **(document if meter in ("fleet", document.get("id")) else {}),
            **job.get("limits", {}).get(meter, {}),
        }
        for key, sign in (("export_limit_mw", 1), ("import_limit_mw", -1)):
            most = series(limits.get(key, 1e9), len(net))
            assert all(sign * n <= limit + 1e-5 for n, limit in zip(net, most, strict=True))


def test_same_seed_gives_the_same_request() -> None:
    assert request(7) == request(7)
    assert request(7) != request(8)


def test_most_requests_can_be_met_and_some_cannot() -> None:
    outcomes = [solve(request(seed, assets=2, intervals=8)).outcome for seed in range(60)]
    assert 0.6 <= outcomes.count("optimal") / len(outcomes) <= 0.95


def test_uncoupled_requests_have_nothing_on_meters_of_several_assets() -> None:
    for seed in range(200):
        job = request(seed, coupled=False)
        assert not {"export_limit_mw", "import_limit_mw"} & job["fleet"].keys()
        assert job["window"].get("settled_at") != "fleet"
        assert all(len(c["applies_to"].get("group", [""])) == 1 for c in job.get("commitments", []))
        assert not any({"site", "fleet"} & c["applies_to"].keys() for c in job.get("commitments", []))
        for site in job["fleet"]["sites"]:
            members = [a for a in job["fleet"]["assets"] if a.get("site") == site["id"]]
            if len(members) > 1:
                assert site.keys() == {"id"}
                assert "price_per_mwh" in job["window"]
                assert site["id"] not in {**job.get("limits", {}), **job.get("positions", {})}


def test_outage_off_the_borders_is_widened_outwards() -> None:
    job = on_off_job(0)
    outage = {"asset": "kiln-b1", "from": "2027-02-09T22:40:00+01:00", "to": "2027-02-09T23:01:00+01:00"}
    job["outages"] = [outage | {"available_fraction": 0.4}, outage | {"available_charge_fraction": 0.2}]
    clock = read_clock(job["window"])
    assert fractions(job, clock, "kiln-b1", "charge") == [1.0, 0.2, 0.2, 1.0, 1.0, 1.0, 1.0]
    assert fractions(job, clock, "kiln-b1", "discharge") == [1.0, 0.4, 0.4, 1.0, 1.0, 1.0, 1.0]


def rows_between(first: str, last: str, start: str, hours: int) -> list[Span]:
    """Return the daily rows between two wall times in Berlin, over an hourly window."""
    window = {"start": start, "interval": "PT1H", "timezone": "Europe/Berlin", "price_per_mwh": [1.0] * hours}
    return spans({"each_day": True, "between": [first, last]}, read_clock(window))


def test_stretch_past_midnight_belongs_to_the_day_it_starts_in() -> None:
    rows = rows_between("22:00", "02:00", "2027-02-09T12:00:00+01:00", 24)
    assert rows == [Span(date(2027, 2, 9), [10, 11, 12, 13])]


def test_stretch_begun_before_the_window_has_no_row_and_one_cut_by_its_end_has() -> None:
    rows = rows_between("16:00", "22:00", "2027-02-09T17:00:00+01:00", 24)
    assert rows == [Span(date(2027, 2, 10), [23])]
    assert rows_between("16:00", "22:00", "2027-02-09T16:00:00+01:00", 2) == [Span(date(2027, 2, 9), [0, 1])]


def test_wall_times_span_five_hours_on_the_long_day_and_three_on_the_short_one() -> None:
    assert rows_between("00:00", "04:00", "2027-10-31T00:00:00+02:00", 9)[0].intervals == [0, 1, 2, 3, 4]
    assert rows_between("00:00", "04:00", "2027-03-28T00:00:00+01:00", 9)[0].intervals == [0, 1, 2]
