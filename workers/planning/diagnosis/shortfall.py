"""What a schedule misses of each row, target and limit, read off its powers; and what is asked lowered to that."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from workers.planning.assembly import UnitPlan
from workers.planning.diagnosis.elements import SIDES, Element
from workers.planning.instance import Instance, Meter
from workers.planning.rows import CeilingRow, CommitmentRow, EnergyRow, FirmRow, HoldingRow, HoursRow
from workers.planning.screening import in_blocks
from workers.planning.store import Store, whole_intervals
from workers.planning.units import Floats

SLACK_MW = 1e-6
"""Powers this near to a threshold reach it, as the contract has it."""

ROOM = 1e-7
"""What is asked is lowered by so much more, MW or MWh, so that the schedule it was read off stays possible."""


@dataclass(frozen=True)
class Missing:
    """How much an element misses, in its unit."""

    element: Element
    amount: float
    unit: str


def power_of_row(row: CommitmentRow, plans: Sequence[UnitPlan]) -> Floats:
    """Give the power in a row's direction, MW per interval."""
    net: Floats = -row.load_mw
    for number in row.units:
        net = net + plans[number].power_mw
    power: Floats = row.sign * net
    return power


def counted_intervals(row: HoursRow, power_mw: Floats) -> int:
    """Count the intervals that count towards a minimum of hours, in blocks that are long enough."""
    able = [t for t in row.intervals if t in row.excused or power_mw[t] >= row.threshold_mw - SLACK_MW]
    return len(in_blocks(able, row.min_block))


def lowered_row(row: CommitmentRow, plans: Sequence[UnitPlan], hours: float) -> tuple[CommitmentRow, float, str]:
    """Ask of a row no more than a schedule delivers; give what it misses, and the unit."""
    power = power_of_row(row, plans)
    where = np.array(row.intervals, dtype=np.int64)
    if isinstance(row, HoursRow):
        due = whole_intervals(row.due_hours, hours)
        short = max(0, due - counted_intervals(row, power))
        return (replace(row, due_hours=(due - short) * hours) if short else row), short * hours, "h"
    if isinstance(row, CeilingRow):
        asked = np.array([t for t in row.intervals if t not in row.excused], dtype=np.int64)
        spent = hours * int((power[asked] > row.threshold_mw + SLACK_MW).sum())
        over = max(0.0, spent - row.allowed_hours)
        return (replace(row, allowed_hours=spent) if over > ROOM else row), over, "h"
    if isinstance(row, FirmRow):
        due = np.zeros_like(row.due_mw)
        asked = np.array([t for t in row.intervals if t not in row.excused], dtype=np.int64)
        due[asked] = row.due_mw[asked]
        left = np.minimum(due, np.maximum(power - ROOM, 0.0))
        missing = float(np.maximum(due - np.maximum(power, 0.0), 0.0).sum()) * hours
        return replace(row, due_mw=left), missing, "MWh"
    if isinstance(row, EnergyRow):
        moved = hours * float(np.maximum(power[where], 0.0).sum())
        missing = max(0.0, row.energy_mwh - moved if row.at_least else moved - row.energy_mwh)
        reached = moved - ROOM if row.at_least else moved + ROOM
        return (replace(row, energy_mwh=reached) if missing > ROOM else row), missing, "MWh"
    assert isinstance(row, HoldingRow)
    nothing = np.zeros(len(power))
    held = sum((plans[number].reserve_mw.get(row.product, nothing) for number in row.units), nothing)
    asked_mw = np.zeros_like(row.due_mw)
    asked_mw[where] = row.due_mw[where]
    missing = hours * float(np.maximum(asked_mw - held, 0.0).sum())
    return replace(row, due_mw=np.minimum(row.due_mw, np.maximum(held - ROOM, 0.0))), missing, "MW h"


def final_energy(store: Store, plan: UnitPlan, hours: float) -> float:
    """Follow the energy of a store to the window's end, MWh."""
    stored = store.initial_mwh
    charged = np.maximum(-plan.power_mw, 0.0) * (hours * store.charge_efficiency)
    discharged = np.maximum(plan.power_mw, 0.0) * (hours / store.discharge_efficiency)
    for moved in (charged - discharged).tolist():
        stored = stored * store.kept + moved
    return stored


def reached_limits(meter: Meter, plans: Sequence[UnitPlan], instance: Instance) -> tuple[Floats, Floats]:
    """Give the power out and in at a meter, MW per interval, with the reserve that may be called on top."""
    net: Floats = -meter.load_mw
    up, down = np.zeros(instance.intervals), np.zeros(instance.intervals)
    for number in meter.units:
        net = net + plans[number].power_mw
        for product, held in plans[number].reserve_mw.items():
            up = up + held * instance.products[product].up
            down = down + held * instance.products[product].down
    is_left = (net > meter.export_limit_mw + SLACK_MW) | (-net > meter.import_limit_mw + SLACK_MW)
    counts = ~meter.is_islanded | is_left  # where the limits of an island have to be raised, it is none
    return net + up * counts, -(net - down * counts)


def lowered_meter(meter: Meter, plans: Sequence[UnitPlan], instance: Instance) -> tuple[Meter, list[tuple[str, float]]]:
    """Raise a meter's limits to what flows; give the sides that are exceeded and by how many MW at most."""
    if not meter.is_limited:
        return meter, []
    flows = dict(zip(SIDES, reached_limits(meter, plans, instance), strict=True))
    exceeded, raised = [], {}
    for side, flow in flows.items():
        limit: Floats = getattr(meter, side)
        over = float(np.max(flow - limit))
        if over > SLACK_MW:
            exceeded.append((side, over))
            raised[side] = np.where(flow > limit, flow + ROOM, limit)
    return replace(meter, **raised), exceeded
