"""Check the oracle's generators against exhaustion, published dispatches and arithmetic."""

from __future__ import annotations

import itertools
import json
from pathlib import Path
from typing import Any

import pytest

from tests.oracles import formulation_generator as formulation
from tests.oracles.classic import enumerate_best
from tests.oracles.formulation import solve
from tests.oracles.formulation_clock import Job
from tests.oracles.formulation_program import Program
from tests.oracles.plain_jobs import at, best, generator, is_impossible, job, margin_of
from tests.oracles.replay_generator import HOURS, LEVELS_MW, generator_job, margin_by_replay

REFERENCE = Path(__file__).parents[1] / "reference"
# A. J. Wood & B. F. Wollenberg, Power Generation, Operation and Control, 2nd ed. 1996, Examples 3A, 3B and 5A; the
# published figures are from memory, the computed ones from the file.
DISPATCH: dict[str, Any] = json.loads((REFERENCE / "economic_dispatch.json").read_text())
SEEDS = range(60)


def agrees(seed: int) -> bool:
    """Tell whether oracle and exhaustion come to the same answer on a generator job."""
    request = generator_job(seed)
    expected = enumerate_best(LEVELS_MW, HOURS, lambda outputs: margin_by_replay(request, outputs))
    answer = solve(request, gap=1e-9)
    if expected is None or answer.margin is None:
        return expected is None and answer.outcome == "infeasible"
    return answer.margin == pytest.approx(expected, abs=1e-5)


@pytest.mark.parametrize("seed", SEEDS)
def test_oracle_agrees_with_exhaustion_on_generators(seed: int) -> None:
    assert agrees(seed)


def test_exhausted_generators_mostly_run_and_some_cannot_be_met() -> None:
    answers = [solve(generator_job(seed)) for seed in SEEDS]
    assert any(answer.outcome == "infeasible" for answer in answers)
    starts = [pair for a in answers for on in a.on.values() for pair in itertools.pairwise([False, *on])]
    assert starts.count((False, True)) >= 30
    assert starts.count((True, False)) >= 15


def nothing(*_: Any) -> None:
    """Stand in for a rule that was left out."""


@pytest.mark.parametrize("rule", ["_starts", "_up_and_down_times", "_ramps"])
def test_rule_left_out_is_noticed(rule: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(formulation, rule, nothing)
    assert not all(agrees(seed) for seed in SEEDS)


def test_minimum_up_time_that_binds_through_a_trip_is_noticed(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(formulation, "unbroken", lambda on, first, n: list(range(first, min(first + n, len(on)))))
    assert not all(agrees(seed) for seed in SEEDS)


def test_forgotten_time_before_the_window_is_noticed(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(formulation.Before, "still_owed", lambda *_: 0)
    assert not all(agrees(seed) for seed in SEEDS)


def islanded(costs: list[list[float]], limits: list[list[float]], load: float) -> Job:
    """Return one hour of an islanded site whose generators carry a load; costs are constant, linear, quadratic."""
    units = [
        generator(
            f"unit-{n + 1}",
            site="skerry",
            min_output_mw=low,
            max_output_mw=high,
            cost={"constant_per_hour": a, "linear_per_mwh": b, "quadratic_per_mw2h": c},
        )
        for n, ((a, b, c), (low, high)) in enumerate(zip(costs, limits, strict=True))
    ]
    base = {"id": "skerry-base", "kind": "fixed_load", "site": "skerry"}
    sites = [{"id": "skerry", "export_limit_mw": 0.0, "import_limit_mw": 0.0}]
    return job([0.0], *units, base, sites=sites, forecasts={"skerry-base": load})


def all_running(request: Job) -> Job:
    """Return the request with every generator on for an hour already, and none free to stop yet."""
    for unit in request["fleet"]["assets"][:-1]:
        unit["min_up_hours"] = 2
        request["initial"][unit["id"]] = {"on": True, "hours_in_state": 1}
    return request


@pytest.mark.parametrize(
    ("key", "computed", "published"),
    [
        ("ed_ex3A", "computed", [393.2, 334.6, 122.2]),
        ("ed_ex3B", "computed_with_limits", [600.0, 187.1, 62.9]),
    ],
)
def test_dispatch_of_the_textbook_is_found(key: str, computed: str, published: list[float]) -> None:
    example = DISPATCH[key]
    load = DISPATCH["ed_ex3A"]["load_MW"]
    answer = best(all_running(islanded(example["F"], DISPATCH["ed_ex3A"]["limits"], load)))
    assert answer.margin == pytest.approx(-example[computed]["cost"], abs=1e-4)
    outputs = [answer.powers[f"unit-{n + 1}"][0] for n in range(3)]
    # Cost is flat around its optimum: 1e-5 of cost is some 0.01 MW of output.
    assert outputs == pytest.approx(published, abs=0.06)
    assert outputs == pytest.approx(example[computed]["P"], abs=0.02)


def test_dispatch_of_the_textbook_without_limits_is_found() -> None:
    example = DISPATCH["ed_ex3B"]
    answer = best(all_running(islanded(example["F"], [[0.0, 900.0]] * 3, DISPATCH["ed_ex3A"]["load_MW"])))
    outputs = [answer.powers[f"unit-{n + 1}"][0] for n in range(3)]
    assert outputs == pytest.approx(example["computed_no_limits"]["P"], abs=0.02)
    _, linear, square = example["F"][0]
    assert linear + 2 * square * outputs[0] == pytest.approx(
        example["published_from_memory"]["no_limits_lambda"], abs=1e-3
    )


@pytest.mark.parametrize("units", ["1", "1+2", "1+3", "2+3", "1+2+3", "2", "3"])
def test_units_to_run_in_the_textbook_cost_what_it_says(units: str) -> None:
    example = DISPATCH["uc_ex5A"]
    indices = [int(unit) - 1 for unit in units.split("+")]
    costs, limits = ([table[n] for n in indices] for table in (example["F"], DISPATCH["ed_ex3A"]["limits"]))
    request = all_running(islanded(costs, limits, example["load_MW"]))
    if example["computed"][units] is None:
        assert is_impossible(request)
        return
    margin = margin_of(request)
    assert margin == pytest.approx(-example["computed"][units], abs=0.05)
    # The book prints whole R/h, cut off.
    assert -margin == pytest.approx(example["published_from_memory"][units], abs=1.0)


def test_cheapest_set_of_units_is_chosen() -> None:
    example = DISPATCH["uc_ex5A"]
    assert example["best"] == "unit 1 alone"
    answer = best(islanded(example["F"], DISPATCH["ed_ex3A"]["limits"], example["load_MW"]))
    assert answer.on == {"unit-1": [True], "unit-2": [False], "unit-3": [False]}


@pytest.mark.parametrize(("price", "output"), [(48.0, 1.0), (46.0, 0.75), (80.0, 2.0)])
def test_generator_runs_where_marginal_cost_meets_the_price(price: float, output: float) -> None:
    unit = generator(min_output_mw=0.0, cost={"linear_per_mwh": 40.0, "quadratic_per_mw2h": 4.0})
    answer = best(job([price], unit))
    assert answer.margin == pytest.approx((price - 40.0) * output - 4.0 * output**2, abs=1e-6)
    assert answer.powers["mill-g1"][0] == pytest.approx(output, abs=1e-3)


def test_squares_left_to_their_tangents_are_noticed(monkeypatch: pytest.MonkeyPatch) -> None:
    example = DISPATCH["ed_ex3A"]
    monkeypatch.setattr(Program, "_missing", lambda *_: 0.0)
    answer = solve(islanded(example["F"], example["limits"], example["load_MW"]), gap=1e-9)
    assert answer.margin is not None
    assert answer.margin > -example["computed"]["cost"] + 1.0


@pytest.mark.parametrize(("hours_off", "cost"), [(1, 5.0), (2, 14.0), (3, 14.0), (None, 40.0)])
def test_start_pays_the_last_entry_reached(hours_off: int | None, cost: float) -> None:
    entries = [(0, 5.0), (2, 14.0), (4, 40.0)]
    unit = generator(start_costs=[{"after_hours_off": hours, "cost": c} for hours, c in entries])
    state = {"on": False} | ({} if hours_off is None else {"hours_in_state": hours_off})
    assert margin_of(job([100.0], unit, initial={"mill-g1": state})) == pytest.approx(120.0 - cost)


def test_last_output_before_shutting_down_is_bound_by_the_ramp_or_the_minimum() -> None:
    unit = generator(ramp_down_mw_per_hour=0.5)
    running = {"mill-g1": {"on": True, "output_mw": 2.0}}
    # Dear, then worthless: 1.5 and 1 MW are lost on before it may be off.
    assert margin_of(job([0.0, 0.0, 0.0], unit, initial=running)) == pytest.approx(-40.0 * 2.5)


def test_trip_frees_ramps_and_up_times_but_not_the_next_start_and_the_rest() -> None:
    unit = generator(
        min_up_hours=5, min_down_hours=2, ramp_down_mw_per_hour=0.1, start_costs=[{"after_hours_off": 0, "cost": 7.0}]
    )
    running = {"mill-g1": {"on": True, "hours_in_state": 1, "output_mw": 2.0}}
    outage = {"asset": "mill-g1", "kind": "forced", "from": at(1), "to": at(2), "available_fraction": 0.4}
    answer = best(job([50.0] * 4, unit, initial=running, outages=[outage]))
    assert answer.on["mill-g1"] == [True, False, False, True]
    assert answer.margin == pytest.approx(10.0 * (2.0 + 2.0) - 7.0)


def kazarlis(load_factor: float = 1.0) -> Job:
    """Return the ten-unit system of Kazarlis et al. 1996 as an islanded site with a reserve of 10 % of its load."""
    data = json.loads((REFERENCE / "unit_commitment_ten_units.json").read_text())
    units, initial = [], {}
    for row in data["units"]:
        hot, cold = row["hot_start_usd"], row["cold_start_usd"]
        # Cold after more than these hours; hours are whole, so from the next one on.
        cooled = row["min_down_h"] + row["cold_start_h"] + 1
        unit = generator(
            f"unit-{row['unit']}",
            site="skerry",
            min_output_mw=row["pmin_MW"],
            max_output_mw=row["pmax_MW"],
            min_up_hours=row["min_up_h"],
            min_down_hours=row["min_down_h"],
            start_costs=[{"after_hours_off": 0, "cost": hot}, {"after_hours_off": cooled, "cost": cold}],
        )
        unit["cost"] = {
            "constant_per_hour": row["a_usd_per_h"],
            "linear_per_mwh": row["b_usd_per_MWh"],
            "quadratic_per_mw2h": row["c_usd_per_MW2h"],
        }
        units.append(unit)
        status = row["init_status_h"]
        initial[unit["id"]] = {"on": status > 0, "hours_in_state": abs(status)}
    load = [load_factor * mw for mw in data["load_MW"]]
    base = {"id": "skerry-base", "kind": "fixed_load", "site": "skerry"}
    spare = {"id": "spare", "direction": "up", "sustain_minutes": 60, "price_per_mw_per_hour": 0.0}
    held = {"id": "spare-held", "kind": "reserve_holding", "applies_to": {"site": "skerry"}, "product": "spare"}
    held["power_mw"] = [data["reserve_fraction"] * mw for mw in load]
    sites = [{"id": "skerry", "export_limit_mw": 0.0, "import_limit_mw": 0.0}]
    return job(
        [0.0] * len(load),
        *units,
        base,
        sites=sites,
        products=[spare],
        initial=initial,
        forecasts={"skerry-base": load},
        commitments=[held],
    )


def test_ten_unit_system_costs_what_is_published() -> None:
    # S. A. Kazarlis, A. G. Bakirtzis, V. Petridis, IEEE Trans. Power Systems 11(1):83-92, 1996; best published cost
    # 563,938 (e.g. A. Viana, J. P. Pedroso, IJEPES 44, 2013), 563,937.69 by the file's own proof.
    answer = solve(kazarlis(), gap=1e-5, time_limit=120.0)
    assert answer.outcome == "optimal"
    assert answer.margin == pytest.approx(-563937.6875, rel=1e-5)
    assert answer.bound == pytest.approx(-563937.6875, rel=2e-5)
