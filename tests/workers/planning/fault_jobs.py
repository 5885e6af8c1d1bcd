"""Small jobs on which a fault in the planner shows, and what it takes to plant and catch one."""

from collections.abc import Callable
from typing import Any

import pytest

from tests.workers.planning.jobs import (
    answer,
    fixed_load,
    flexible_load,
    generator,
    job,
    outage,
    product,
    renewable,
    store,
)
from workers.planning import instance as indexing
from workers.planning import plan
from workers.planning.instance import Instance
from workers.planning.plan import PlanningError
from workers.planning.solvers.ending import SolverError

Document = dict[str, Any]
Change = Callable[[Any], Any]
G1, B1, PV, PUMPS = "quay-g1", "quay-b1", "quay-pv", "quay-pumps"
QUAY = {"assets": [B1]}


def at(hour: int) -> str:
    return f"2027-02-09T{hour:02d}:00:00Z"


def caught(document: Document) -> None:
    """Plan a document with a fault planted: no schedule may come of it.

    Either the audit refuses it, or the money does not agree, or the model has lost what bounds it and says so.
    """
    with pytest.raises((PlanningError, SolverError)) as refusal:
        answer(document)
    fault: BaseException = refusal.value
    if isinstance(fault, SolverError):
        assert fault.word in {"kUnbounded", "kUnboundedOrInfeasible"}
    elif isinstance(fault, PlanningError):
        money = "the model said" in fault.what or "above its bound" in fault.what
        assert fault.violations or money


def planted(monkeypatch: pytest.MonkeyPatch, change: Callable[[Instance], Instance]) -> None:
    """Let the planner index every request right but for `change`, and go on without its first arithmetic."""
    true_index = indexing.instance_of
    monkeypatch.setattr(plan, "instance_of", lambda read: change(true_index(read)))
    monkeypatch.setattr(plan, "screen", lambda _: [])


def steady(**changes: Any) -> Document:
    return generator(max_output_mw=1.0, **changes)


def running(document: Document, **state: Any) -> Document:
    return document | {"initial": {G1: {"on": True} | state}}


def resting(document: Document, **state: Any) -> Document:
    return document | {"initial": {G1: {"on": False} | state}}


CURVE = {"constant_per_hour": 1.0, "linear_per_mwh": 4.0, "quadratic_per_mw2h": 0.5}
COSTLY = job([10.0], generator(cost=CURVE))
HOT_OR_COLD = [{"after_hours_off": 0, "cost": 10.0}, {"after_hours_off": 3, "cost": 50.0}]
COLD = resting(job([70.0], steady(start_costs=HOT_OR_COLD)), hours_in_state=5)
HALF_OUT = job([10.0, 20.0], generator(), outages=[outage(G1, 0, 1, 0.5)])
QUARTERS = {"interval": "PT15M"}
RISING = running(job([10.0, 10.0], generator(ramp_up_mw_per_hour=2.0), window=QUARTERS))
FALLING = running(job([-10.0, -10.0], generator(ramp_down_mw_per_hour=2.0), window=QUARTERS), output_mw=4.0)
LASTING = job([-10.0, 30.0, -10.0, -10.0], steady(min_up_hours=2))
PAUSING = job([10.0, -5.0, 10.0], steady(min_down_hours=2))
KEPT_UP = running(job([-10.0] * 3, steady(min_up_hours=3)), hours_in_state=1)
KEPT_DOWN = resting(job([10.0] * 3, steady(min_down_hours=3)), hours_in_state=1)
OUT_AND_BACK = running(
    job([10.0] * 3, generator(ramp_up_mw_per_hour=0.5), outages=[outage(G1, 1, 2, 0.25)]), output_mw=4.0
)
SPARE = job([0.0], generator(reserve_products=[]), window={"reserve_products": [product(price_per_mw_per_hour=5.0)]})


def pumping(prices: list[float], first: int, end: int, energy: float, **changes: Any) -> Document:
    members = {"outages": changes.pop("outages")} if "outages" in changes else {}
    needs = {PUMPS: [{"energy_mwh": energy, "from": at(first), "to": at(end)}]}
    return job(prices, flexible_load(**changes), energy_needs=needs, **members)


SUNNY = job([10.0, 20.0], renewable(cost_per_mwh=2.0), forecasts={PV: [1.0, 3.0]}, outages=[outage(PV, 1, 2, 0.5)])
FORCED_SUN = job([-5.0], renewable(curtailable=False), forecasts={PV: 3.0})
BROKEN_UP = pumping([10.0, 50.0, 10.0], 0, 3, 4.0, interruptible=False, min_draw_mw=0.5)


def selling(prices: list[float], kind: str, *, whom: Document = QUAY, **members: Any) -> Document:
    """Return a job of a store that only sells its 2 MWh, with one commitment."""
    promise = {"id": "promise", "kind": kind, "applies_to": whom} | members
    return job(prices, store(charge_limit_mw=0.0), stored=2.0, commitments=[promise])


CEILING = selling([10.0, 20.0], "hours_at_most", threshold={"mw": 0.5}, headroom_mw=0.25, hours=1)
USED_UP = CEILING | {"counted_before": {"commitments": {"promise": {B1: 1.0}}}}
FIRM = selling([-10.0, 20.0, 30.0], "firm_delivery", power_mw=[0.5, 0.0, 0.0])
PRICED = selling([-30.0], "firm_delivery", power_mw=1.0, shortfall_price_per_mwh=20.0)
DUE = selling([-10.0, -20.0], "energy_at_least", energy_mwh=1.5)
CAPPED = selling([10.0, 20.0], "energy_at_most", energy_mwh=1.5)
CAPPED_LATE = selling([10.0, 20.0], "energy_at_most", energy_mwh=0.5, to=at(1))
AT_THE_METER = job(
    [-10.0],
    store(charge_limit_mw=0.0, site="quay"),
    fixed_load(site="quay"),
    stored=2.0,
    sites=[{"id": "quay"}],
    forecasts={"quay-mill": 0.25},
    commitments=[{"id": "promise", "kind": "firm_delivery", "applies_to": {"site": "quay"}, "power_mw": 0.5}],
)
UP, OTHER = product(), product("up-15", sustain_minutes=15.0)
HELD = job(
    [50.0, 50.0],
    store(charge_limit_mw=0.0),
    stored=1.0,
    window={"reserve_products": [UP, OTHER]},
    commitments=[
        {"id": "spare", "kind": "reserve_holding", "applies_to": QUAY, "product": "up-60", "power_mw": [0.5, 1.0]}
    ],
)
PAID = product(price_per_mw_per_hour=5.0)


def paid(prices: list[float], *plants: Document, offered: Document = PAID, **members: Any) -> Document:
    window = {"reserve_products": [offered]} | members.pop("window", {})
    return job(prices, *plants, window=window, **members)


BACKED = paid([1.0], store(charge_limit_mw=0.0), stored=0.5, final=0.5)
LOSSY = paid([1.0], store(charge_limit_mw=0.0, discharge_efficiency=0.5), stored=0.5, final=0.5)
BLOCKED = paid([0.0] * 3, generator(), offered=PAID | {"block_hours": 2}, outages=[outage(G1, 1, 2, 0.5)])
TOKYO = paid(
    [0.0] * 3,
    generator(),
    offered=PAID | {"block_hours": 24},
    outages=[outage(G1, 14, 15, 0.5)],
    window={"timezone": "Asia/Tokyo", "start": at(13)},
)
BOTH_WAYS = paid([1.0], store(), offered=PAID | {"direction": "symmetric"}, stored=1.75, final=1.75)
LOTS = job([10.0], store(discharge_limit_mw=0.75, site="quay"), stored=2.0, sites=[{"id": "quay", "lot_mw": 0.5}])
CONNECTED = paid([100.0], store(site="quay"), stored=1.0, final=1.0, sites=[{"id": "quay", "export_limit_mw": 0.5}])
OWED = BACKED | {
    "commitments": [
        {"id": "spare", "kind": "reserve_holding", "applies_to": QUAY, "product": "up-60", "power_mw": 0.25}
    ]
}
