"""What arithmetic can refuse before any solver starts.

Each finding is a proof: it uses only what no schedule can escape - how much energy can be in a store, how much power
can flow, how many intervals there are. The sentences are those of the diagnosis: what is needed, what can be had, by
when.
"""

from collections.abc import Iterator
from datetime import datetime

import numpy as np

from workers.planning.instance import Instance, Meter
from workers.planning.rows import HoursRow, most_power
from workers.planning.store import Store, whole_intervals

SLACK_MWH = 1e-6
SLACK_MW = 1e-6


def screen(instance: Instance) -> list[str]:
    """Say what cannot be, a sentence each; an empty list proves nothing."""
    return list(_refusals(instance))


def _refusals(instance: Instance) -> Iterator[str]:
    for store in instance.stores:
        yield from _stored_energy(instance, store)
    for row in instance.rows:
        if isinstance(row, HoursRow) and row.price is None:
            yield from _hours(instance, row)
    for meter in instance.connections:
        yield from _connection(instance, meter)


def _clock(instance: Instance, number: int) -> str:
    """Write the instant at which an interval starts (its number may be one past the last) as local time."""
    local: datetime = instance.calendar.local_starts[0] if number == 0 else _end(instance, number - 1)
    return local.strftime("%Y-%m-%d %H:%M")


def _end(instance: Instance, number: int) -> datetime:
    start = instance.calendar.local_starts[number]
    return (instance.calendar.start + (number + 1) * instance.calendar.interval).astimezone(start.tzinfo)


def _stored_energy(instance: Instance, store: Store) -> Iterator[str]:
    """Follow the most and the least that can be stored; physics, floor, ceiling and final target must leave room."""
    hours = instance.hours
    into = hours * store.charge_efficiency * store.charge_limit_mw * store.can_charge
    out_of = hours / store.discharge_efficiency * store.discharge_limit_mw * store.can_discharge
    most, least = store.most_initial_mwh, store.least_initial_mwh
    limits = zip(into.tolist(), out_of.tolist(), store.floor_mwh.tolist(), store.ceiling_mwh.tolist(), strict=True)
    for t, (charged, discharged, floor, ceiling) in enumerate(limits):
        most = min(most * store.kept + charged, ceiling)
        least = max(least * store.kept - discharged, floor)
        if most < floor - SLACK_MWH:
            what = f"must hold {floor:g} MWh at {_clock(instance, t + 1)}; at most {most:g} MWh can be there"
        elif least > ceiling + SLACK_MWH:
            what = f"may hold {ceiling:g} MWh at {_clock(instance, t + 1)}; at least {least:g} MWh must be there"
        else:
            continue
        yield f"{store.id} {what}."
        return
    if most < store.final_floor_mwh - SLACK_MWH:
        yield (
            f"{store.id} shall hold {store.final_floor_mwh:g} MWh at {_clock(instance, instance.intervals)}; "
            f"at most {most:g} MWh can be there."
        )


def _words(row: HoursRow) -> str:
    verb = "discharge" if row.sign > 0 else "charge"
    return f"Commitment {row.id}{row.where}: {row.due_hours:g} h of {verb} at {row.threshold_mw:g} MW or more"


def _hours(instance: Instance, row: HoursRow) -> Iterator[str]:
    """Count the intervals that can reach the threshold, then weigh the energy they need."""
    due = whole_intervals(row.due_hours, instance.hours)
    if due <= 0:
        return
    power = most_power(instance.units, row)
    able = [t for t in row.intervals if t in row.excused or power[t] >= row.threshold_mw - SLACK_MW]
    counted = in_blocks(able, row.min_block)
    if len(counted) < due:
        unit = f" in unbroken stretches of {row.min_block * instance.hours:g} h" if row.min_block > 1 else ""
        yield (
            f"{_words(row)} cannot fit: limits and outages allow it for at most "
            f"{len(counted) * instance.hours:g} h{unit} of the time that counts."
        )
        return
    only = instance.units[row.units[0]] if row.asset is not None and row.units else None
    if isinstance(only, Store) and row.sign > 0:
        yield from _energy_for_hours(instance, row, only, counted, due)


def in_blocks(able: list[int], least: int) -> list[int]:
    """Keep the intervals that lie in unbroken stretches of at least so many."""
    kept: list[int] = []
    stretch: list[int] = []
    for t in [*able, -1]:
        if stretch and t != stretch[-1] + 1:
            kept += stretch if len(stretch) >= least else []
            stretch = []
        stretch.append(t)
    return kept


def _energy_for_hours(instance: Instance, row: HoursRow, store: Store, counted: list[int], due: int) -> Iterator[str]:
    """Compare what the hours take from the store with what can be there: the start, and charging in between.

    A delivering interval charges nothing, so of the intervals up to the last one that counts, all but those
    delivering may charge, at most the best of them; self-discharge only lowers what is there.
    """
    paid = due - len(row.excused.intersection(counted))
    if paid <= 0:
        return
    last, end = counted[-1], instance.intervals - 1
    weighed = (
        (last, float(store.floor_mwh[last]), "its floor"),
        (end, store.final_floor_mwh, "its final target"),
    )
    hours = instance.hours
    needed = paid * hours * row.threshold_mw / store.discharge_efficiency
    for until, kept_back, what in weighed:
        best = np.sort((store.charge_limit_mw * store.can_charge)[: until + 1])[::-1][: until + 1 - paid]
        charged = float(best.sum()) * hours * store.charge_efficiency
        spare = store.most_initial_mwh - kept_back
        if needed > spare + charged + SLACK_MWH:
            yield (
                f"{paid * hours:g} h at {row.threshold_mw:g} MW need {needed:g} MWh from {store.id} between "
                f"{_clock(instance, counted[0])} and {_clock(instance, last + 1)}; {spare:g} MWh above {what} at the "
                f"start and at most {charged:g} MWh charged by {_clock(instance, until + 1)} make at most "
                f"{max(spare + charged, 0.0):g} MWh (commitment {row.id})."
            )
            return


def _connection(instance: Instance, meter: Meter) -> Iterator[str]:
    """Weigh what loads draw against what the connection and the stores behind it can bring."""
    discharge = np.zeros(instance.intervals)
    for number in meter.units:
        discharge = discharge + instance.units[number].most_out_mw
    short = meter.load_mw - meter.import_limit_mw - discharge
    if (short > SLACK_MW).any():
        t = int(np.argmax(short))
        yield (
            f"Loads at {meter.id} draw {meter.load_mw[t]:g} MW at {_clock(instance, t)}; its import limit of "
            f"{meter.import_limit_mw[t]:g} MW and its plants bring at most "
            f"{meter.import_limit_mw[t] + discharge[t]:g} MW."
        )
