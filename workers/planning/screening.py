"""What arithmetic can refuse before any solver starts.

Each finding is a proof: it uses only what no schedule can escape - how much energy can be in a store, how much power
can flow, how many intervals there are. The sentences are those of the diagnosis: what is needed, what can be had, by
when.
"""

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from datetime import datetime

import numpy as np

from workers.planning.instance import Instance, Meter
from workers.planning.rows import HoursRow, most_power
from workers.planning.store import Store, whole_intervals

SLACK_MWH = 1e-6
SLACK_MW = 1e-6


@dataclass(frozen=True)
class Finding:
    """Elements that cannot hold together, as pointers with words, and the sentence that says why."""

    members: tuple[tuple[str, str], ...]
    sentence: str


def screen(instance: Instance) -> list[Finding]:
    """List what cannot be; an empty list proves nothing."""
    findings: list[Finding] = []
    for store in instance.stores:
        findings += _stored_energy(instance, store)
    for row in instance.rows:
        if isinstance(row, HoursRow) and row.price is None:
            findings += _hours(instance, row)
    for meter in (*instance.meters, instance.fleet):
        findings += _connection(instance, meter)
    return findings


def _clock(instance: Instance, number: int) -> str:
    """Write the instant at which an interval starts (its number may be one past the last) as local time."""
    local: datetime = instance.calendar.local_starts[0] if number == 0 else _end(instance, number - 1)
    return local.strftime("%Y-%m-%d %H:%M")


def _end(instance: Instance, number: int) -> datetime:
    start = instance.calendar.local_starts[number]
    return (instance.calendar.start + (number + 1) * instance.calendar.interval).astimezone(start.tzinfo)


def _stored_energy(instance: Instance, store: Store) -> Iterator[Finding]:
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
        start = (f"/initial/{store.id}", f"{store.initial_mwh:g} MWh stored at the start")
        yield Finding((start,), f"{store.id} {what}.")
        return
    if most < store.final_floor_mwh - SLACK_MWH:
        target = (f"/targets/{store.id}/final_stored_mwh", f"at least {store.final_floor_mwh:g} MWh at the end")
        yield Finding(
            (target, *((outage.pointer, outage.text) for outage in store.outages)),
            f"{store.id} shall hold {store.final_floor_mwh:g} MWh at {_clock(instance, instance.intervals)}; "
            f"at most {most:g} MWh can be there.",
        )


def _words(row: HoursRow) -> str:
    verb = "discharge" if row.sign > 0 else "charge"
    return f"Commitment {row.id}{row.where}: {row.due_hours:g} h of {verb} at {row.threshold_mw:g} MW or more"


def _hours(instance: Instance, row: HoursRow) -> Iterator[Finding]:
    """Count the intervals that can reach the threshold, then weigh the energy they need."""
    due = whole_intervals(row.due_hours, instance.hours)
    if due <= 0:
        return
    member = (row.pointer, _words(row))
    power = most_power(instance.units, row)
    able = [t for t in row.intervals if t in row.excused or power[t] >= row.threshold_mw - SLACK_MW]
    counted = in_blocks(able, row.min_block)
    if len(counted) < due:
        unit = f" in unbroken stretches of {row.min_block * instance.hours:g} h" if row.min_block > 1 else ""
        yield Finding(
            (member, *_outages(instance, row.units, row.intervals)),
            f"{_words(row)} cannot fit: limits and outages allow it for at most "
            f"{len(counted) * instance.hours:g} h{unit} of the time that counts.",
        )
        return
    only = instance.units[row.units[0]] if row.asset is not None and row.units else None
    if isinstance(only, Store) and row.sign > 0:
        yield from _energy_for_hours(instance, row, only, counted, due, member)


def _outages(instance: Instance, units: Iterable[int], intervals: Iterable[int]) -> list[tuple[str, str]]:
    """Name the outages of these units that touch any of the intervals: what they leave is all there is."""
    asked = set(intervals)
    return [
        (outage.pointer, outage.text)
        for number in units
        for outage in instance.units[number].outages
        if asked.intersection(outage.intervals)
    ]


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


def _energy_for_hours(
    instance: Instance, row: HoursRow, store: Store, counted: list[int], due: int, member: tuple[str, str]
) -> Iterator[Finding]:
    """Compare what the hours take from the store with what can be there: the start, and charging in between.

    A delivering interval charges nothing, so of the intervals up to the last one that counts, all but those
    delivering may charge, at most the best of them; self-discharge only lowers what is there.
    """
    paid = due - len(row.excused.intersection(counted))
    if paid <= 0:
        return
    at_start = (f"/initial/{store.id}", f"{store.initial_mwh:g} MWh stored at the start")
    at_end = (f"/targets/{store.id}/final_stored_mwh", f"at least {store.final_floor_mwh:g} MWh at the end")
    last, end = counted[-1], instance.intervals - 1
    weighed = (
        (last, float(store.floor_mwh[last]), "its floor", (member, at_start)),
        (end, store.final_floor_mwh, "its final target", (member, at_start, at_end)),
    )
    hours = instance.hours
    needed = paid * hours * row.threshold_mw / store.discharge_efficiency
    for until, kept_back, what, members in weighed:
        best = np.sort((store.charge_limit_mw * store.can_charge)[: until + 1])[::-1][: until + 1 - paid]
        charged = float(best.sum()) * hours * store.charge_efficiency
        spare = store.most_initial_mwh - kept_back
        if needed > spare + charged + SLACK_MWH:
            yield Finding(
                (*members, *_outages(instance, row.units, range(until + 1))),
                f"{paid * hours:g} h at {row.threshold_mw:g} MW need {needed:g} MWh from {store.id} between "
                f"{_clock(instance, counted[0])} and {_clock(instance, last + 1)}; {spare:g} MWh above {what} at the "
                f"start and at most {charged:g} MWh charged by {_clock(instance, until + 1)} make at most "
                f"{max(spare + charged, 0.0):g} MWh (commitment {row.id}).",
            )
            return


def _connection(instance: Instance, meter: Meter) -> Iterator[Finding]:
    """Weigh what loads draw against what the connection and the stores behind it can bring."""
    discharge = np.zeros(instance.intervals)
    for number in meter.units:
        discharge = discharge + instance.units[number].most_out_mw
    short = meter.load_mw - meter.import_limit_mw - discharge
    if (short > SLACK_MW).any():
        t = int(np.argmax(short))
        yield Finding(
            ((meter.pointer, f"import limit of {meter.id}"),),
            f"loads at {meter.id} draw {meter.load_mw[t]:g} MW at {_clock(instance, t)}; its import limit of "
            f"{meter.import_limit_mw[t]:g} MW and its plants bring at most "
            f"{meter.import_limit_mw[t] + discharge[t]:g} MW.",
        )
