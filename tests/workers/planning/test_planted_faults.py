"""The audit bites: a fault planted in the planner's indexing or in a rule never leaves as a schedule.

Each fault is of a kind that a slip of the pen makes. The planner solves the wrong problem, and the audit, which shares
no code with it, refuses the answer.
"""

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from schemas.calendar import Calendar
from schemas.job import OneWindow
from tests.workers.planning.jobs import answer, hours, job, planned, store
from workers.planning import instance as indexing
from workers.planning import joint, plan
from workers.planning.instance import Instance
from workers.planning.plan import PlanningError
from workers.planning.rows import HoursRow
from workers.planning.rules import (
    connection_limits,
    daily_cycles,
    exclusive_modes,
    final_energy,
    hours_at_least,
    minimum_power,
    ramps,
    runs,
    stored_energy,
    stored_for_hours,
)
from workers.planning.store import Store

Document = dict[str, Any]
QUAY = {"assets": ["quay-b1"]}


def caught(document: Document) -> None:
    with pytest.raises(PlanningError) as refusal:
        answer(document)
    assert refusal.value.violations or "the model said" in refusal.value.what


def with_stores(change: Callable[[Store], Store]) -> Callable[[OneWindow], Instance]:
    """Return an indexing that is right but for what `change` does to each store."""
    true_index = indexing.instance_of

    def faulty(read: OneWindow) -> Instance:
        found = true_index(read)
        return replace(found, units=tuple(change(entry) for entry in found.stores))

    return faulty


FAULTS_IN_STORES: dict[str, tuple[Callable[[Store], Store], Document]] = {
    "efficiencies the wrong way round": (
        lambda s: replace(
            s, charge_efficiency=1 / s.charge_efficiency, discharge_efficiency=1 / s.discharge_efficiency
        ),
        job([10.0, 100.0], store(charge_efficiency=0.8, discharge_efficiency=0.5)),
    ),
    "charge and discharge efficiency swapped": (
        lambda s: replace(s, charge_efficiency=s.discharge_efficiency, discharge_efficiency=s.charge_efficiency),
        job([10.0, 100.0], store(discharge_efficiency=0.5, energy_capacity_mwh=0.75)),
    ),
    "self-discharge forgotten": (
        lambda s: replace(s, kept=1.0),
        job([10.0, 100.0], store(self_discharge_per_hour=0.5)),
    ),
    "self-discharge per interval instead of per hour": (
        lambda s: replace(s, kept=1 - (1 - s.kept) / 4),
        job([10.0, 100.0], store(self_discharge_per_hour=0.5)),
    ),
    "limits swapped": (
        lambda s: replace(s, charge_limit_mw=s.discharge_limit_mw, discharge_limit_mw=s.charge_limit_mw),
        job([10.0, 100.0], store(discharge_limit_mw=0.5), stored=2.0),
    ),
    "an outage one interval late": (
        lambda s: replace(s, discharge_limit_mw=np.roll(s.discharge_limit_mw, 1)),
        job(
            [100.0, 10.0],
            store(),
            stored=2.0,
            outages=[
                {"asset": "quay-b1", "kind": "forced", "from": "2027-02-09T00:10:00Z", "to": "2027-02-09T00:50:00Z"}
            ],
        ),
    ),
    "the floor taken for zero": (
        lambda s: replace(s, floor_mwh=np.zeros_like(s.floor_mwh)),
        job([10.0], store(min_stored_mwh=0.5), stored=1.0),
    ),
    "the ceiling taken for the capacity": (
        lambda s: replace(s, ceiling_mwh=np.full_like(s.ceiling_mwh, 2.0)),
        job([1.0, 1.0, 100.0, 100.0], store(max_stored_mwh=1.5)),
    ),
    "more energy at the start than there is": (
        lambda s: replace(s, initial_mwh=s.initial_mwh + 0.5),
        job([100.0], store(), stored=0.0),
    ),
    "the final target forgotten": (
        lambda s: replace(s, final_floor_mwh=0.0),
        job([100.0], store(), stored=1.0, final=1.0),
    ),
    "minimum power forgotten": (
        lambda s: replace(s, min_discharge_mw=0.0),
        job([100.0], store(min_discharge_mw=0.5), stored=0.25),
    ),
    "a run one interval short": (
        lambda s: replace(s, min_run=s.min_run - 1),
        job(
            [-10.0, 100.0, -20.0, -20.0], store(min_discharge_mw=0.5, charge_limit_mw=0.0, min_run_hours=2), stored=2.0
        ),
    ),
    "a rest one interval short": (
        lambda s: replace(s, min_rest=s.min_rest - 1),
        job(
            [100.0, -50.0, 100.0],
            store(min_discharge_mw=0.5, charge_limit_mw=0.0, min_rest_hours=2),
            stored=2.0,
        ),
    ),
    "the ramp per hour taken for one per interval": (
        lambda s: replace(s, ramp_mw=None if s.ramp_mw is None else s.ramp_mw * 4),
        job([100.0], store(ramp_mw_per_hour=0.25), stored=2.0),
    ),
    "the power before the window forgotten": (
        lambda s: replace(s, power_before_mw=0.0),
        job([-10.0], store(ramp_mw_per_hour=0.25), stored=2.0)
        | {"initial": {"quay-b1": {"stored_mwh": 2.0, "power_mw": 1.0}}},
    ),
    "cycles counted before forgotten": (
        lambda s: replace(s, discharge_allowances=tuple(replace(a, amount=1.0) for a in s.discharge_allowances)),
        job(
            [100.0, 100.0],
            store(max_cycles_per_day=0.5),
            stored=2.0,
            counted_before={"assets": {"quay-b1": {"discharged_mwh": 0.5}}},
        ),
    ),
}


@pytest.mark.parametrize("fault", FAULTS_IN_STORES)
def test_a_store_indexed_wrongly_is_caught(fault: str, monkeypatch: pytest.MonkeyPatch) -> None:
    change, document = FAULTS_IN_STORES[fault]
    planned(document)
    monkeypatch.setattr(plan, "instance_of", with_stores(change))
    monkeypatch.setattr(plan, "screen", lambda _: [])
    caught(document)


def two_stores(**members: Any) -> Document:
    pair = [store(site="quay", standby_load_mw=0.25), store("quay-b2", site="quay")]
    return job([10.0, 20.0], *pair, stored=2.0, **members)


LIMITED = two_stores(sites=[{"id": "quay", "export_limit_mw": 1.0}])
PROMISED = two_stores(sites=[{"id": "quay"}]) | {
    "commitments": [hours({"site": "quay"}, 2, 1.0)],
    "window": two_stores()["window"] | {"price_per_mwh": [-10.0, 20.0]},
}


def with_rows(found: Instance, change: Callable[[HoursRow], HoursRow]) -> Instance:
    return replace(found, rows=tuple(change(row) if isinstance(row, HoursRow) else row for row in found.rows))


FAULTS_IN_METERS: dict[str, tuple[Callable[[Instance], Instance], Document]] = {
    "a site limit dropped": (
        lambda i: replace(i, meters=tuple(replace(m, export_limit_mw=m.export_limit_mw + np.inf) for m in i.meters)),
        LIMITED,
    ),
    "standby load counted on the wrong side": (
        lambda i: replace(i, meters=tuple(replace(m, load_mw=-m.load_mw) for m in i.meters)),
        two_stores(sites=[{"id": "quay", "import_limit_mw": 1.0}])
        | {"window": LIMITED["window"] | {"price_per_mwh": [-9.0, 9.0]}}
        | {"initial": {"quay-b1": {"stored_mwh": 0.0}, "quay-b2": {"stored_mwh": 0.0}}},
    ),
    "a commitment one interval short": (
        lambda i: with_rows(i, lambda r: replace(r, due_hours=r.due_hours - i.hours)),
        PROMISED,
    ),
    "a commitment without its headroom": (
        lambda i: with_rows(i, lambda r: replace(r, threshold_mw=r.threshold_mw - 0.25)),
        PROMISED,
    ),
    "a commitment counted in the wrong hours": (
        lambda i: with_rows(i, lambda r: replace(r, intervals=(1,), due_hours=1.0)),
        PROMISED | {"commitments": [hours({"site": "quay"}, 1, 1.0, to="2027-02-09T01:00:00Z")]},
    ),
    "prices shifted by an interval": (
        lambda i: replace(i, buy=np.roll(i.buy, 1), sell=np.roll(i.sell, 1)),
        job([10.0, 100.0], store(), stored=1.0),
    ),
}


@pytest.mark.parametrize("fault", FAULTS_IN_METERS)
def test_a_meter_or_a_row_indexed_wrongly_is_caught(fault: str, monkeypatch: pytest.MonkeyPatch) -> None:
    change, document = FAULTS_IN_METERS[fault]
    planned(document)
    true_index = indexing.instance_of
    monkeypatch.setattr(plan, "instance_of", lambda read: change(true_index(read)))
    monkeypatch.setattr(plan, "screen", lambda _: [])
    caught(document)


def test_a_day_border_one_hour_off_on_the_day_of_25_hours_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    # Europe/Berlin, 2027-10-31: the day has 25 hours. Its last one belongs to it, not to the next day.
    window = {"start": "2027-10-30T22:00:00Z", "timezone": "Europe/Berlin"}
    prices = [-50.0] * 23 + [90.0, 100.0, 80.0]
    document = job(prices, store(max_cycles_per_day=0.5, charge_limit_mw=0.0), stored=2.0, window=window)
    assert planned(document).margin == pytest.approx(100.0 + 80.0)

    def off_by_one(self: Calendar) -> tuple[Any, ...]:
        days = [(self.start + k * self.interval).date() for k in range(self.count)]
        first = days[1]
        return ((first, range(24)), (days[-1], range(24, self.count)))

    monkeypatch.setattr(Calendar, "day_ranges", property(off_by_one))
    caught(document)


def nothing(*_: Any, **__: Any) -> Any:
    return None


FAULTS_IN_RULES: dict[str, tuple[Any, Document]] = {
    "stored energy": (stored_energy, job([100.0], store(), stored=0.5)),
    "minimum power": (minimum_power, job([100.0], store(min_discharge_mw=0.5), stored=0.25)),
    "runs": (runs, FAULTS_IN_STORES["a run one interval short"][1]),
    "ramps": (ramps, FAULTS_IN_STORES["the ramp per hour taken for one per interval"][1]),
    "daily cycles": (daily_cycles, FAULTS_IN_STORES["cycles counted before forgotten"][1]),
    "final energy": (final_energy, FAULTS_IN_STORES["the final target forgotten"][1]),
    "connection limits": (connection_limits, LIMITED),
    "hours at least": (hours_at_least, PROMISED),
}


@pytest.mark.parametrize("rule", FAULTS_IN_RULES)
def test_a_rule_left_out_is_caught(rule: str, monkeypatch: pytest.MonkeyPatch) -> None:
    module, document = FAULTS_IN_RULES[rule]
    planned(document)
    monkeypatch.setattr(module, "add", nothing)
    caught(document)


def test_modes_left_mixed_are_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    # The trap of negative prices: burning energy would earn 9.50. Neither binaries nor the search for mixing work here.
    trap = job([-50.0], store(energy_capacity_mwh=1.0, charge_efficiency=0.9, discharge_efficiency=0.9), stored=1.0)
    assert planned(trap).margin == pytest.approx(0.0)
    true_add = exclusive_modes.add
    monkeypatch.setattr(
        exclusive_modes, "add", lambda model, columns, where: true_add(model, columns, np.zeros_like(where))
    )
    monkeypatch.setattr(joint, "mixed_modes", lambda columns, _: [np.zeros(1, dtype=bool) for _ in columns.stores])
    caught(trap)


def test_the_commitment_rule_with_its_threshold_halved_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    true_add = hours_at_least.add
    monkeypatch.setattr(
        hours_at_least,
        "add",
        lambda model, columns, row: true_add(model, columns, replace(row, threshold_mw=row.threshold_mw / 2)),
    )
    # the rows that bind stored energy to hours know the threshold too, and would make up for it
    monkeypatch.setattr(stored_for_hours, "is_worth_adding", lambda _: False)
    caught(
        job(
            [10.0, 50.0],
            store(charge_limit_mw=0.0),
            stored=1.0,
            commitments=[hours(QUAY, 1, 0.5, to="2027-02-09T01:00:00Z")],
        )
    )
