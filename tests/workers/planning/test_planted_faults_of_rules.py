"""The audit bites for every rule of the new kinds: one left out, or with a slip of the pen, never leaves as a schedule.

As in `test_planted_faults`; slips that only ask for too much are not among them (see `test_planted_faults_of_kinds`).
"""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from tests.workers.planning.fault_jobs import (
    BACKED,
    CAPPED,
    CEILING,
    COLD,
    CONNECTED,
    COSTLY,
    DUE,
    FIRM,
    HELD,
    KEPT_UP,
    LASTING,
    LOSSY,
    LOTS,
    OWED,
    RISING,
    SUNNY,
    Change,
    Document,
    caught,
    paid,
    pumping,
    resting,
)
from tests.workers.planning.jobs import (
    fixed_load,
    generator,
    job,
    planned,
    store,
)
from workers.planning.instance import Meter
from workers.planning.rows import CommitmentRow, EnergyRow
from workers.planning.rules import (
    connection_limits,
    energy_needs,
    energy_totals,
    firm_delivery,
    fuel_cost,
    hours_at_most,
    lots,
    output_limits,
    output_ramps,
    renewable_cost,
    reserve_backing,
    reserve_holding,
    reserve_income,
    start_costs,
    unit_states,
)
from workers.planning.rules.columns import GeneratorColumns


def nothing(*_: Any, **__: Any) -> Any:
    return None


LEFT_OUT: dict[str, tuple[Any, Document]] = {
    "unit states": (unit_states, LASTING),
    "output limits": (output_limits, job([9.0], generator(cost={"constant_per_hour": 10.0}))),
    "output ramps": (output_ramps, RISING),
    "fuel cost": (fuel_cost, COSTLY),
    "start costs": (start_costs, COLD),
    "renewable cost": (renewable_cost, SUNNY),
    "energy needs": (energy_needs, pumping([10.0, 30.0], 0, 2, 1.0)),
    "hours at most": (hours_at_most, CEILING),
    "firm delivery": (firm_delivery, FIRM),
    "energy at least": (energy_totals, DUE),
    "energy at most": (energy_totals, CAPPED),
    "reserve holding": (reserve_holding, HELD),
    "reserve backing": (reserve_backing, BACKED),
    "reserve income": (reserve_income, OWED),
    "reserve of a running generator": (output_limits, paid([0.0], generator())),
    "connection limits with reserve": (connection_limits, CONNECTED),
    "lots": (lots, LOTS),
}


@pytest.mark.parametrize("rule", LEFT_OUT)
def test_a_rule_left_out_is_caught(rule: str, monkeypatch: pytest.MonkeyPatch) -> None:
    module, document = LEFT_OUT[rule]
    planned(document)
    monkeypatch.setattr(module, "add", nothing)
    caught(document)


SLIPS: dict[str, tuple[Any, str, Any, Document]] = {
    "the state before the window not held": (unit_states, "_hold_state_before", nothing, KEPT_UP),
    "any start taken for any kind": (start_costs, "_within", nothing, COLD),
    "reserve not counted against the output": (
        output_limits,
        "reserve_terms",
        lambda *_, **__: [],
        paid([9.0], generator()),
    ),
    "reserve of a store not backed by energy": (reserve_backing, "_at_both_ends", nothing, BACKED),
    "reserve of a store not backed by power": (
        reserve_backing,
        "reserve_terms",
        lambda *_, **__: [],
        paid([10.0], store(charge_limit_mw=0.0), stored=2.0),
    ),
    "squares never checked": (
        fuel_cost,
        "too_low",
        lambda columns, *_: np.zeros(len(columns.output)),
        job([10.0], generator(cost={"linear_per_mwh": 5.0, "quadratic_per_mw2h": 0.7})),
    ),
}


@pytest.mark.parametrize("slip", SLIPS)
def test_a_rule_with_a_part_left_out_is_caught(slip: str, monkeypatch: pytest.MonkeyPatch) -> None:
    module, name, wrong, document = SLIPS[slip]
    planned(document)
    monkeypatch.setattr(module, name, wrong)
    caught(document)


def halved(**names: float) -> Change:
    """Return a change that multiplies members of a row or meter."""
    return lambda entry: replace(entry, **{name: getattr(entry, name) * factor for name, factor in names.items()})


ROW_SLIPS: dict[str, tuple[Any, Change, Document]] = {
    "a ceiling at twice its threshold": (hours_at_most, halved(threshold_mw=2.0), CEILING),
    "half the power that is due": (firm_delivery, halved(due_mw=0.5), FIRM),
    "half the energy that is due": (energy_totals, halved(energy_mwh=0.5), DUE),
    "twice the energy that is allowed": (energy_totals, halved(energy_mwh=2.0), CAPPED),
    "half the reserve that is due": (reserve_holding, halved(due_mw=0.5), HELD),
    "half a lot": (lots, lambda meter: replace(meter, lot_mw=meter.lot_mw and meter.lot_mw / 2), LOTS),
    "loads on the wrong side of a lot": (
        lots,
        halved(load_mw=-1.0),
        job(
            [10.0],
            store(discharge_limit_mw=0.75, site="quay"),
            fixed_load(site="quay"),
            stored=2.0,
            sites=[{"id": "quay", "lot_mw": 0.5}],
            forecasts={"quay-mill": 0.2},
        ),
    ),
}


@pytest.mark.parametrize("slip", ROW_SLIPS)
def test_a_rule_with_wrong_figures_is_caught(slip: str, monkeypatch: pytest.MonkeyPatch) -> None:
    module, change, document = ROW_SLIPS[slip]
    planned(document)
    true_add = module.add

    def faulty(model: Any, columns: Any, entry: CommitmentRow | Meter) -> None:
        true_add(model, columns, change(entry))

    monkeypatch.setattr(module, "add", faulty)
    caught(document)


def test_reserve_at_a_meter_taken_for_an_island_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    planned(CONNECTED)
    monkeypatch.setattr(Meter, "is_islanded", property(lambda meter: np.ones(len(meter.load_mw), dtype=bool)))
    caught(CONNECTED)


def test_reserve_backed_with_the_efficiency_the_wrong_way_round_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    planned(LOSSY)
    true_lasting = reserve_backing._lasting

    def faulty(columns: Any, products: Any, efficiency: float, *, up: bool) -> Any:
        return true_lasting(columns, products, 1 / efficiency, up=up)

    monkeypatch.setattr(reserve_backing, "_lasting", faulty)
    caught(LOSSY)


def test_energy_backing_asked_for_at_the_start_alone_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    document = paid([4.0], store(charge_limit_mw=0.0, discharge_limit_mw=2.0), stored=1.0)
    planned(document)

    def faulty(model: Any, columns: Any, lasting: Any, sign: float, limit: Any) -> None:
        first = float(limit[0] - sign * columns.unit.initial_mwh)
        model.rows(-np.inf, first, *((held[:1], factor) for held, factor in lasting))

    monkeypatch.setattr(reserve_backing, "_at_both_ends", faulty)
    caught(document)


def test_energy_backing_asked_for_at_the_end_alone_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    document = paid([1.0], store())
    planned(document)

    def faulty(model: Any, columns: Any, lasting: Any, sign: float, limit: Any) -> None:
        model.rows(-np.inf, limit, *lasting, (columns.stored, sign))

    monkeypatch.setattr(reserve_backing, "_at_both_ends", faulty)
    caught(document)


def test_a_cold_start_counted_an_hour_late_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    document = resting(COLD, hours_in_state=3)
    planned(document)
    true_within = start_costs._within

    def faulty(model: Any, columns: GeneratorColumns, kind: Any, hours_off: tuple[float, float], hours: float) -> None:
        true_within(model, columns, kind, (hours_off[0], hours_off[1] + hours), hours)

    monkeypatch.setattr(start_costs, "_within", faulty)
    caught(document)


def test_exports_netted_over_hours_under_a_cap_are_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    # The meter draws in one hour and exports in the other: the cap is on what it exports.
    document = job(
        [0.0, 20.0],
        store(charge_limit_mw=0.0, site="quay"),
        fixed_load(site="quay"),
        stored=2.0,
        sites=[{"id": "quay"}],
        forecasts={"quay-mill": [0.5, 0.0]},
        commitments=[{"id": "cap", "kind": "energy_at_most", "applies_to": {"site": "quay"}, "energy_mwh": 0.5}],
    )
    planned(document)

    def faulty(model: Any, columns: Any, row: EnergyRow) -> None:
        where = np.array(row.intervals)
        terms = [(part[where], columns.instance.hours * factor) for part, factor in columns.net(row.units)]
        model.row(-np.inf, row.energy_mwh + float(row.load_mw[where].sum()), *terms)

    monkeypatch.setattr(energy_totals, "add", faulty)
    caught(document)
