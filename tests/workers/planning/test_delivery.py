"""The recursion over delivered intervals: by hand, by trying every choice, and against an oracle that shares nothing.

What it says of a lone store is held against scipy's mixed-integer solver (Virtanen et al., Nature Methods 17, 2020) on
jobs at their utmost; the rows that it puts into models may change no margin.
"""

from collections import Counter
from dataclasses import replace
from datetime import date
from itertools import product
from time import monotonic
from typing import Any

import numpy as np
import pytest

from tests.oracles.formulation import solve
from tests.oracles.random_hours import tight_request
from tests.oracles.random_mixed import mixed_request
from tests.oracles.random_requests import request
from tests.workers.planning.jobs import hours, indexed, job, outage, store
from workers.planning.assembly import UnitPlan, assemble, where_mixing_may_pay
from workers.planning.delivery import Deliveries, at_once, deliveries_of
from workers.planning.diagnosis import lone_store, nearest
from workers.planning.diagnosis.feasibility import Solving
from workers.planning.diagnosis.nearest import least_missing
from workers.planning.diagnosis.shortfall import final_energy
from workers.planning.instance import Instance, instance_of
from workers.planning.joint import solve_jointly
from workers.planning.limits import Limits, Unwatched
from workers.planning.rows import HoursRow
from workers.planning.rules import stored_for_hours
from workers.planning.solvers import highs

Document = dict[str, Any]

TIGHT = 400
REQUESTS = 150
GAP = 1e-6
B1 = "quay-b1"


def deliveries(document: Document) -> Deliveries:
    """Return what binds the only store of a job."""
    instance = instance_of(indexed(document))
    rows = [row for row in instance.rows if isinstance(row, HoursRow)]
    [found] = deliveries_of(instance.stores[0], rows, instance.hours, instance.intervals)
    return found


def test_energy_and_count_by_hand() -> None:
    # 1 MWh at the start, 1 MW both ways, lossless, 2 MWh at most; 0.5 MW for two of three hours, 1 MWh at the end
    found = deliveries(job([10.0] * 3, store(), stored=1.0, final=1.0, commitments=[hours({"assets": [B1]}, 2, 0.5)]))
    nothing = -np.inf
    assert found.most_mwh.tolist() == [[1, nothing, nothing], [2, 0.5, nothing], [2, 1.5, 0.0], [nothing, nothing, 1.0]]
    assert found.least_mwh[:, 0].tolist() == [1.0, 2.0, np.inf, np.inf]
    assert found.least_mwh[2].tolist() == [np.inf, 1.5, 0.0]


def test_an_excused_interval_counts_and_charges() -> None:
    excused = [{"from": "2027-02-09T00:00:00Z", "to": "2027-02-09T01:00:00Z"}]
    asked = hours({"assets": [B1]}, 1, 0.5, excused=excused)
    found = deliveries(job([10.0] * 2, store(), stored=0.0, final=2.0, commitments=[asked]))
    assert found.most_mwh[-1].tolist() == [-np.inf, 2.0]
    assert at_once(found).is_schedule


def test_what_is_needed_by_hand_with_losses_a_floor_and_an_excuse() -> None:
    # half is lost in an hour, 1 MW both ways, 0.25 to 2 MWh; 0.5 MW for two of three hours, the second one excused
    excused = [{"from": "2027-02-09T01:00:00Z", "to": "2027-02-09T02:00:00Z"}]
    asked = hours({"assets": [B1]}, 2, 0.5, excused=excused)
    losing = store(self_discharge_per_hour=0.5, min_stored_mwh=0.25)
    found = deliveries(job([10.0] * 3, losing, stored=1.0, final=0.5, commitments=[asked]))
    nothing = np.inf
    # at 02:00 with one counted, 0.5 MWh must be left after the hour: (0.5 + 0.5) / 0.5; with two, charging does it
    assert found.least_mwh[2].tolist() == [nothing, 2.0, 0.25]
    # at 01:00 with one counted the excused hour counts and charges, with none it counts and the last one delivers
    assert found.least_mwh[1].tolist() == [2.0, 0.25, 0.25]
    assert found.most_mwh[1].tolist() == [1.5, nothing * -1, nothing * -1]


def test_what_needs_more_than_fits_cannot_be() -> None:
    # two hours at 1 MW in a row take 2 MWh, and 1.5 is all that fits
    asked = hours({"assets": [B1]}, 2, 1.0, **{"from": "2027-02-09T01:00:00Z"})
    found = deliveries(job([10.0] * 3, store(max_stored_mwh=1.5), stored=1.5, final=0.0, commitments=[asked]))
    assert found.least_mwh[0].tolist() == [np.inf, np.inf, np.inf]
    assert found.most_mwh[-1].tolist() == [-np.inf, -np.inf, -np.inf]


def test_what_is_delivered_beyond_one_row_does_not_count_in_the_next() -> None:
    first = hours({"assets": [B1]}, 1, 0.5, to="2027-02-09T02:00:00Z")
    second = hours({"assets": [B1]}, 1, 0.5, id="late", **{"from": "2027-02-09T02:00:00Z"})
    free = job([10.0] * 4, store(), stored=2.0, commitments=[first, second])
    assert lone_store.is_possible(instance_of(indexed(free))) is True
    out = free | {"outages": [outage(B1, 2, 4)]}
    assert lone_store.is_possible(instance_of(indexed(out))) is False
    assert deliveries(out).most_mwh[2].tolist() == [-np.inf, 2.0, -np.inf]
    assert deliveries(free).least_mwh[2].tolist() == [np.inf, 0.0, np.inf]


def test_a_store_that_loses_what_it_must_hold_cannot_be() -> None:
    losing = store(self_discharge_per_hour=0.1, min_stored_mwh=1.0, charge_limit_mw=0.0)
    instance = instance_of(indexed(job([10.0] * 2, losing, stored=1.05, final=0.0)))
    assert lone_store.is_possible(instance) is False


def _at_night(cycles: float, asked: Document) -> Instance:
    window = {"start": "2027-02-09T22:00:00+00:00"}
    cycling = store(max_cycles_per_day=cycles)
    return instance_of(indexed(job([10.0] * 4, cycling, stored=2.0, window=window, commitments=[asked])))


def test_cycles_of_days_that_hours_share_are_left_to_a_solver() -> None:
    each_day = hours({"assets": [B1]}, 1, 0.5, each_day=True)
    assert lone_store.is_possible(_at_night(0.25, hours({"assets": [B1]}, 2, 0.5))) is None
    assert lone_store.is_possible(_at_night(0.25, each_day)) is True
    assert lone_store.is_possible(_at_night(0.2, each_day)) is False


@pytest.mark.parametrize(
    "changes",
    [
        {"min_discharge_mw": 0.2},
        {"min_charge_mw": 0.2},
        {"min_discharge_mw": 0.2, "min_charge_mw": 0.2, "min_run_hours": 2.0},
        {"min_discharge_mw": 0.2, "min_charge_mw": 0.2, "min_rest_hours": 1.0},
        {"min_discharge_mw": 0.2, "min_charge_mw": 0.2, "max_starts_per_day": 2},
        {"ramp_mw_per_hour": 0.5},
    ],
)
def test_a_store_that_more_binds_is_not_judged_possible(changes: Document) -> None:
    asked = [hours({"assets": [B1]}, 1, 0.5)]
    assert lone_store.is_possible(instance_of(indexed(job([10.0] * 3, store(), stored=1.0, commitments=asked))))
    bound = instance_of(indexed(job([10.0] * 3, store(**changes), stored=1.0, commitments=asked)))
    assert lone_store.is_possible(bound) is None
    beyond = [hours({"assets": [B1]}, 3, 1.0)]
    refused = instance_of(indexed(job([10.0] * 3, store(**changes), stored=1.0, commitments=beyond)))
    assert lone_store.is_possible(refused) is False


@pytest.mark.parametrize(
    "members",
    [
        {"sites": [{"id": "quay", "export_limit_mw": 1.0, "lot_mw": 0.1}]},
        {"fleet": {"export_limit_mw": 1.0, "lot_mw": 0.1}},
        {"commitments": [hours({"assets": [B1]}, 1, 0.5, direction="charge")]},
        {"commitments": [hours({"assets": [B1]}, 2, 0.5, min_block_hours=2.0)]},
        {"commitments": [{"id": "f", "kind": "firm_delivery", "applies_to": {"assets": [B1]}, "power_mw": 0.1}]},
        {"commitments": [hours({"fleet": True}, 1, 0.5)]},
    ],
)
def test_lots_blocks_and_other_rows_are_left_to_a_solver(members: Document) -> None:
    site = {"site": "quay"} if "sites" in members else {}
    assert lone_store.is_possible(instance_of(indexed(job([10.0] * 3, store(**site), stored=1.0, **members)))) is None


def test_a_connection_leaves_a_store_what_the_load_beside_it_does_not_take() -> None:
    # 0.3 MW may come in, and the mill takes 0.1 of it: 0.2 MWh an hour for 0.5 MW of delivery, of which 0.4 leave
    mill = {"id": "quay-mill", "kind": "fixed_load", "site": "quay"}
    for import_mw, export_mw, due, possible in [
        (0.35, 0.4, 1, True),
        (0.34, 0.4, 1, False),
        (0.6, 0.39, 1, False),
        (0.6, 0.4, 2, False),
        (0.05, 0.4, 0, None),
    ]:
        sites = [{"id": "quay", "import_limit_mw": import_mw, "export_limit_mw": export_mw}]
        asked: Document = {
            "sites": sites,
            "forecasts": {"quay-mill": 0.1},
            "commitments": [hours({"assets": [B1]}, due, 0.5)],
        }
        document = job([10.0] * 3, store(site="quay"), mill, **asked)
        assert lone_store.is_possible(instance_of(indexed(document))) is possible
        if possible is not None:
            assert (solve(document).outcome == "optimal") is possible


def test_hours_without_any_interval_cannot_be() -> None:
    instance = instance_of(indexed(job([10.0] * 2, store(), stored=1.0, commitments=[hours({"assets": [B1]}, 1, 0.5)])))
    assert lone_store.is_possible(instance) is True
    rows = tuple(replace(row, intervals=()) for row in instance.rows)
    assert lone_store.is_possible(replace(instance, rows=rows)) is False


def _by_trying(document: Document) -> bool:
    """Try every choice of delivering intervals of an hourly, lossless-or-not store; all others charge what they can."""
    asset, [asked] = document["fleet"]["assets"][0], document["commitments"]
    count = len(document["window"]["price_per_mwh"])
    needed = asked["threshold"]["mw"] / asset["discharge_efficiency"]
    for delivers in product([False, True], repeat=count):
        if sum(delivers) < asked["hours"]:
            continue
        stored, held = document["initial"][B1]["stored_mwh"], True
        for yes in delivers:
            room = asset["energy_capacity_mwh"] - stored
            stored += -needed if yes else min(room, asset["charge_limit_mw"] * asset["charge_efficiency"])
            held = held and stored >= -1e-9
        if held and stored >= document["targets"][B1]["final_stored_mwh"] - 1e-9:
            return True
    return False


def test_the_recursion_is_what_trying_every_choice_finds() -> None:
    seen: Counter[bool] = Counter()
    for stored, final, most, threshold, due in product(
        [0.0, 0.7, 2.0], [0.0, 1.1], [0.3, 1.0], [0.4, 0.9], [1, 3, 4, 6]
    ):
        asset = store(charge_limit_mw=most, charge_efficiency=0.9, discharge_efficiency=0.8)
        asked = [hours({"assets": [B1]}, due, threshold)]
        document = job([10.0] * 7, asset, stored=stored, final=final, commitments=asked)
        possible = _by_trying(document)
        assert lone_store.is_possible(instance_of(indexed(document))) is possible, document
        seen[possible] += 1
    assert min(seen[True], seen[False]) > 20


def _wrong_of_lone_store(seed: int, seen: Counter[str]) -> list[str]:
    """Hold what is said of a lone store, and its plan, against the oracle."""
    document = tight_request(seed)
    instance, oracle = instance_of(indexed(document)), solve(document, gap=1e-9)
    said = lone_store.is_possible(instance)
    seen[f"{said} {oracle.outcome}"] += 1
    if said is None:
        return []
    wrong = [] if said is (oracle.outcome == "optimal") else [f"seed {seed}: {said}, oracle {oracle.outcome}"]
    if len(instance.rows) == 1:
        wrong += _wrong_most(document, instance, seed)
    return wrong


def _wrong_most(document: Document, instance: Instance, seed: int) -> list[str]:
    """Ask the oracle for the most hours that are said to be had, and for an interval more."""
    [row] = instance.rows
    assert isinstance(row, HoursRow)
    most = lone_store.most_intervals(instance, row)
    asked = document["commitments"][0]
    credited = asked["hours"] - row.due_hours

    def holds(count: int) -> bool:
        changed = asked | {"hours": count * instance.hours + credited}
        return solve(document | {"commitments": [changed]}, gap=1e-9).outcome == "optimal"

    if most is None:
        is_known = lone_store.is_possible(replace(instance, rows=(replace(row, due_hours=0.0),))) is not None
        return [f"seed {seed}: no hours at all, oracle has some"] if is_known and holds(0) else []
    wrong = [] if holds(most) else [f"seed {seed}: {most} intervals are too many"]
    return [*wrong, f"seed {seed}: {most} intervals are too few"] if holds(most + 1) else wrong


def _wrong_margin(document: Document, name: str, seen: Counter[str], monkeypatch: pytest.MonkeyPatch) -> list[str]:
    """Plan with the rows wherever they can be, and without them: both must find the same."""
    instance, found = replace(instance_of(indexed(document)), relative_gap=GAP), []
    for is_worth_adding in (lambda each: each.store.kept >= stored_for_hours.LEAST_KEPT, lambda _: False):
        monkeypatch.setattr(stored_for_hours, "is_worth_adding", is_worth_adding)
        limits = Limits(60.0, 1, monotonic())
        found.append(solve_jointly(instance, limits, Unwatched(), seed=0, seconds=60.0, by_pyomo=False))
    with_rows, without = found
    seen[with_rows.stopped.name] += 1
    if with_rows.margin is None or without.margin is None:
        return [] if with_rows.stopped is without.stopped else [f"{name}: {with_rows.stopped}, {without.stopped}"]
    slack = 2 * GAP * max(1.0, abs(without.margin)) + 1e-4
    close = abs(with_rows.margin - without.margin) <= slack and with_rows.bound >= without.margin - slack
    return [] if close else [f"{name}: {with_rows.margin} to {with_rows.bound}, without {without.margin}"]


def _compare(seeds: range, monkeypatch: pytest.MonkeyPatch) -> None:
    said: Counter[str] = Counter()
    wrong = [fault for seed in seeds for fault in _wrong_of_lone_store(seed, said)]
    ended: Counter[str] = Counter()
    for seed in seeds:
        wrong += _wrong_margin(tight_request(seed), f"tight {seed}", ended, monkeypatch)
        particular = tight_request(seed, is_particular=True)
        wrong += _wrong_margin(particular, f"particular {seed}", ended, monkeypatch)
    print(f"seeds {seeds.start}-{seeds.stop - 1}: said {dict(said)}, ended {dict(ended)}")
    assert not wrong, "\n".join(wrong)
    assert min(said["True optimal"], said["False infeasible"]) > len(seeds) // 10
    assert ended["WITHIN_GAP"] > len(seeds) // 5


def test_a_tenth_of_the_tight_stores_agree_with_the_oracle(monkeypatch: pytest.MonkeyPatch) -> None:
    _compare(range(TIGHT // 10), monkeypatch)


def test_todays_tight_stores_agree_with_the_oracle(monkeypatch: pytest.MonkeyPatch) -> None:
    first = date.today().toordinal() * 10  # noqa: DTZ011 - any number that changes daily will do
    _compare(range(first, first + 10), monkeypatch)


@pytest.mark.full
def test_all_tight_stores_agree_with_the_oracle(monkeypatch: pytest.MonkeyPatch) -> None:
    _compare(range(TIGHT), monkeypatch)


def _compare_fleets(seeds: range, monkeypatch: pytest.MonkeyPatch) -> None:
    ended: Counter[str] = Counter()
    wrong: list[str] = []
    for seed in seeds:
        wrong += _wrong_margin(request(seed), f"fleet {seed}", ended, monkeypatch)
        wrong += _wrong_margin(mixed_request(seed, assets=2, intervals=5), f"mixed {seed}", ended, monkeypatch)
    print(f"fleets {seeds.start}-{seeds.stop - 1}: {dict(ended)}")
    assert not wrong, "\n".join(wrong)
    assert ended["WITHIN_GAP"] > len(seeds)


def test_the_rows_change_no_margin_of_a_tenth_of_the_fleets(monkeypatch: pytest.MonkeyPatch) -> None:
    _compare_fleets(range(REQUESTS // 10), monkeypatch)


@pytest.mark.full
def test_the_rows_change_no_margin_of_any_fleet(monkeypatch: pytest.MonkeyPatch) -> None:
    _compare_fleets(range(REQUESTS), monkeypatch)


def test_the_rows_close_most_of_the_gap_of_a_store_at_its_utmost(monkeypatch: pytest.MonkeyPatch) -> None:
    # 0.5 MW for seven hours is the utmost of a 2 MWh store that is out from 04:00 to 06:00
    prices = [20.0, 25, 30, 60, 20, 10, 80, 90, 15, 10, 70, 95, 20, 15, 99, 40]
    losing = store(charge_efficiency=0.85, discharge_efficiency=0.9, charge_limit_mw=0.8)
    asked = [hours({"assets": [B1]}, 7, 0.5)]
    document = job(prices, losing, stored=1.0, final=1.5, outages=[outage(B1, 4, 6)], commitments=asked)
    instance = instance_of(indexed(document))
    bounds = []
    for is_worth_adding in (lambda _: True, lambda _: False):
        monkeypatch.setattr(stored_for_hours, "is_worth_adding", is_worth_adding)
        relaxed = assemble(instance, where_mixing_may_pay(instance), by_pyomo=False).without_integers()
        bounds.append(highs.solve(relaxed.matrix, highs.Effort(0.0, 0.0, 30.0, 0), Unwatched()).bound)
    best = solve(document, gap=1e-9).margin
    assert best is not None
    print(f"best {best}, relaxed with the rows {bounds[0]}, without {bounds[1]}")
    assert best - 1e-6 <= bounds[0]
    assert bounds[0] - best < 0.2 * (bounds[1] - best)


def _missing(instance: Instance, plan: UnitPlan) -> float:
    """Give what a store misses of its only row and of its target, MWh."""
    [row], [unit] = instance.rows, instance.stores
    assert isinstance(row, HoursRow)
    counted = sum(plan.power_mw[t] >= row.threshold_mw - 1e-6 or t in row.excused for t in row.intervals)
    short = max(0.0, unit.final_floor_mwh - final_energy(unit, plan, instance.hours))
    return float(row.threshold_mw * max(0.0, row.due_hours - counted * instance.hours) + short)


def test_the_least_that_is_missing_is_what_a_solver_finds(monkeypatch: pytest.MonkeyPatch) -> None:
    compared = 0
    for seed in range(120):
        instance = instance_of(indexed(tight_request(seed)))
        plan = lone_store.least_missing(instance, lambda row: row.threshold_mw)
        if plan is None or lone_store.is_possible(instance) is not False:
            continue
        with monkeypatch.context() as patched:
            patched.setattr(lone_store, "least_missing", lambda *_: None)
            solving = Solving(Limits(60.0, 1, monotonic()), Unwatched(), 0, monotonic() + 60.0)
            [solved] = least_missing(instance, solving) or [None]
        assert solved is not None
        found, least = _missing(instance, plan), _missing(instance, solved)
        assert abs(found - least) <= nearest.GRAIN_MWH + nearest.GRAIN_SHARE * least, seed
        assert found <= least + 1e-6, seed
        compared += 1
    assert compared > 10
