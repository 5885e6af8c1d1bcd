"""What a schedule misses of each row and limit, read off its powers; and what is asked lowered to what it gives."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from workers.planning.assembly import UnitPlan
from workers.planning.diagnosis.elements import SIDES
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
class Lowered:
    """A row that asks no more than a schedule gives, and how much that is short of the row as it was, in `unit`."""

    row: CommitmentRow
    missing: float
    unit: str


def lowered(row: CommitmentRow, plans: Sequence[UnitPlan], hours: float) -> Lowered:
    """Ask of a row no more than a schedule gives."""
    power = _power(row, plans)
    if isinstance(row, HoursRow):
        return _hours(row, power, hours)
    if isinstance(row, CeilingRow):
        return _ceiling(row, power, hours)
    if isinstance(row, FirmRow):
        return _firm(row, power, hours)
    if isinstance(row, EnergyRow):
        return _energy(row, power, hours)
    assert isinstance(row, HoldingRow)
    return _holding(row, plans, hours)


def _power(row: CommitmentRow, plans: Sequence[UnitPlan]) -> Floats:
    """Give the power in a row's direction, MW per interval."""
    net: Floats = -row.load_mw
    for number in row.units:
        net = net + plans[number].power_mw
    power: Floats = row.sign * net
    return power


def _asked(row: CommitmentRow) -> list[int]:
    return [t for t in row.intervals if t not in row.excused]


def _hours(row: HoursRow, power_mw: Floats, hours: float) -> Lowered:
    able = [t for t in row.intervals if t in row.excused or power_mw[t] >= row.threshold_mw - SLACK_MW]
    had = len(in_blocks(able, row.min_block)) * hours
    if had >= row.due_hours - ROOM:
        return Lowered(row, 0.0, "h")
    return Lowered(replace(row, due_hours=had), whole_intervals(row.due_hours, hours) * hours - had, "h")


def _ceiling(row: CeilingRow, power_mw: Floats, hours: float) -> Lowered:
    spent = hours * int((power_mw[_asked(row)] > row.threshold_mw + SLACK_MW).sum())
    over = spent - row.allowed_hours
    return Lowered(replace(row, allowed_hours=spent), over, "h") if over > ROOM else Lowered(row, 0.0, "h")


def _firm(row: FirmRow, power_mw: Floats, hours: float) -> Lowered:
    due = np.zeros_like(row.due_mw)
    due[_asked(row)] = row.due_mw[_asked(row)]
    missing = np.maximum(due - np.maximum(power_mw, 0.0), 0.0)
    left = np.where(missing > 0, np.maximum(power_mw - ROOM, 0.0), due)
    return Lowered(replace(row, due_mw=left), float(missing.sum()) * hours, "MWh")


def _energy(row: EnergyRow, power_mw: Floats, hours: float) -> Lowered:
    moved = hours * float(np.maximum(power_mw[list(row.intervals)], 0.0).sum())
    missing = row.energy_mwh - moved if row.at_least else moved - row.energy_mwh
    if missing <= ROOM:
        return Lowered(row, 0.0, "MWh")
    return Lowered(replace(row, energy_mwh=moved - ROOM if row.at_least else moved + ROOM), missing, "MWh")


def _holding(row: HoldingRow, plans: Sequence[UnitPlan], hours: float) -> Lowered:
    held = np.zeros_like(row.due_mw)
    for number in row.units:
        if row.product in plans[number].reserve_mw:
            held = held + plans[number].reserve_mw[row.product]
    due = np.zeros_like(row.due_mw)
    due[list(row.intervals)] = row.due_mw[list(row.intervals)]
    missing = np.maximum(due - held, 0.0)
    left = np.where(missing > 0, np.maximum(held - ROOM, 0.0), due)
    return Lowered(replace(row, due_mw=left), float(missing.sum()) * hours, "MW h")


def final_energy(store: Store, plan: UnitPlan, hours: float) -> float:
    """Follow the energy of a store to the window's end, MWh."""
    stored = store.initial_mwh
    charged = np.maximum(-plan.power_mw, 0.0) * (hours * store.charge_efficiency)
    discharged = np.maximum(plan.power_mw, 0.0) * (hours / store.discharge_efficiency)
    for moved in (charged - discharged).tolist():
        stored = stored * store.kept + moved
    return stored


@dataclass(frozen=True)
class Raised:
    """A meter whose limits are raised to what flows, and by how many MW at most each side was exceeded."""

    meter: Meter
    exceeded: dict[str, float]


def raised(meter: Meter, plans: Sequence[UnitPlan], instance: Instance) -> Raised:
    """Raise a meter's limits to what a schedule needs."""
    flows = dict(zip(SIDES, _flows(meter, plans, instance), strict=True))
    limits: dict[str, Floats] = {side: getattr(meter, side) for side in SIDES}
    over = {side: float(np.max(flow - limits[side])) for side, flow in flows.items()}
    exceeded = {side: amount for side, amount in over.items() if amount > SLACK_MW}
    for side in exceeded:
        limits[side] = np.where(flows[side] > limits[side], flows[side] + ROOM, limits[side])
    export, taken = limits.values()
    return Raised(replace(meter, export_limit_mw=export, import_limit_mw=taken) if exceeded else meter, exceeded)


def _flows(meter: Meter, plans: Sequence[UnitPlan], instance: Instance) -> tuple[Floats, Floats]:
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
