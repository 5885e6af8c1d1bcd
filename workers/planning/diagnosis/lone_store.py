"""What a store alone can do, without a solver: exact where nothing but its energy, its limits and its hours matter.

That is the question that a diagnosis of batteries asks most: can this store deliver so many hours, with this target,
this outage, this threshold? The recursion of `delivery` answers it, and a schedule that delivers whenever it can often
does so at once. Of a store that more binds (least powers, runs, ramps, blocks, other rows) it tells what is beyond it.
"""

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np

from workers.planning.assembly import UnitPlan
from workers.planning.delivery import EXACT_MWH, Deliveries, at_once, deliveries_of, in_sequence
from workers.planning.instance import Instance
from workers.planning.rows import HoursRow
from workers.planning.store import DayAllowance, Store, whole_intervals


def is_possible(instance: Instance) -> bool | None:
    """Tell whether a lone store can meet its binding rows; None where the answer takes more than energy and hours."""
    if len(instance.units) != 1 or not isinstance(instance.units[0], Store):
        return None
    store = _behind_its_meters(instance, instance.units[0])
    sequences = _sequences(instance, store or instance.units[0])
    if any(_due(row, instance.hours) and not row.intervals for row in _asked(instance)):
        return False
    if not all(_can_be(deliveries) for deliveries in sequences):
        return False
    return True if store is not None and len(sequences) == 1 and _is_all_that_matters(instance, store) else None


def most_intervals(instance: Instance, row: HoursRow) -> int | None:
    """Give how many intervals of one row a lone store can deliver, all else met; None where that is not known."""

    def can_be(count: int) -> bool | None:
        asked = replace(row, due_hours=count * instance.hours)
        return is_possible(replace(instance, rows=tuple(asked if each is row else each for each in instance.rows)))

    if not can_be(0):
        return None
    works, fails = 0, len(row.intervals) + 1
    # what is delivered at once is often the most
    store = instance.stores[0]
    count = at_once(_sequences(instance, _behind_its_meters(instance, store) or store)[0]).within(row)
    while fails - works > 1:
        count = min(max(count, works + 1), fails - 1)
        if can_be(count):
            works, count = count, count + 1
        else:
            fails, count = count, (works + count) // 2
    return works


def least_missing(instance: Instance, price_per_hour: Callable[[HoursRow], float]) -> UnitPlan | None:
    """Find what a lone store does that misses least of one row's hours, priced, and of its final target, at 1 per MWh.

    None where more than energy and hours matters, where several rows ask for hours, or where nothing can be done.
    """
    if len(instance.units) != 1 or not isinstance(instance.units[0], Store):
        return None
    store, sequences = instance.units[0], _sequences(instance, instance.units[0])
    if len(sequences) != 1 or len(sequences[0].rows) != 1 or not _is_all_that_matters(instance, store):
        return None
    if any(meter.is_limited for meter in instance.connections):
        return None
    deliveries = replace(sequences[0], lowest=np.zeros_like(sequences[0].lowest))
    row, counts = deliveries.rows[0], np.arange(deliveries.due + 1)
    missing = price_per_hour(row) * np.maximum(row.due_hours - counts * deliveries.hours, 0.0)
    missing += np.maximum(store.final_floor_mwh - deliveries.most_mwh[-1], 0.0)
    missing[[not _is_allowed(deliveries, [count]) for count in counts.tolist()]] = np.inf
    best = int(np.argmin(missing))
    return _plan_with(deliveries, best) if np.isfinite(missing[best]) else None


def _plan_with(deliveries: Deliveries, count: int) -> UnitPlan:
    """Follow the recursion back from a count at the end, then forward, charging all there is room for."""
    store, most, hours = deliveries.store, deliveries.most_mwh, deliveries.hours
    charged, taken = deliveries.charged_mwh, deliveries.taken_mwh
    delivers = np.zeros(deliveries.intervals, dtype=bool)
    for t in range(deliveries.intervals - 1, -1, -1):
        idle = min(most[t, count] * store.kept + charged[t], store.ceiling_mwh[t])
        if idle < most[t + 1, count] - EXACT_MWH:
            count -= 1
            delivers[t] = not deliveries.excused[t]
    power, stored = np.zeros(deliveries.intervals), store.most_initial_mwh
    for t in range(deliveries.intervals):
        stored *= store.kept
        if delivers[t]:
            stored -= taken[t]
            power[t] = taken[t] * store.discharge_efficiency / hours
        else:
            into = max(0.0, min(charged[t], store.ceiling_mwh[t] - stored))
            stored += into
            power[t] = -into / (hours * store.charge_efficiency)
    return UnitPlan(power, None, {})


def _behind_its_meters(instance: Instance, store: Store) -> Store | None:
    """Narrow a store's limits to what its connections leave beside the loads there.

    None where that is not all that a connection asks: lots, others behind it, a load that the store itself must feed.
    """
    for meter in instance.connections:
        if not meter.is_limited:
            continue
        into, out_of = meter.import_limit_mw - meter.load_mw, meter.export_limit_mw + meter.load_mw
        if meter.lot_mw is not None or meter.units != (0,) or (into < 0).any() or (out_of < 0).any():
            return None
        store = replace(
            store,
            charge_limit_mw=np.minimum(store.charge_limit_mw, into),
            discharge_limit_mw=np.minimum(store.discharge_limit_mw, out_of),
        )
    return store


def _sequences(instance: Instance, store: Store) -> list[Deliveries]:
    """Take what binds a store's hours of discharge, row after row; one with no rows where nothing does."""
    found = list(deliveries_of(store, _asked(instance), instance.hours, instance.intervals))
    return found or [in_sequence(store, [], instance.hours, instance.intervals)]


def _asked(instance: Instance) -> list[HoursRow]:
    return [row for row in instance.rows if isinstance(row, HoursRow) and row.discharging == 0]


def _is_all_that_matters(instance: Instance, store: Store) -> bool:
    """Tell whether nothing binds a store but its energy, its limits, and unbroken hours of discharge."""
    asked, days = _asked(instance), store.discharge_allowances
    return (
        not store.has_states
        and store.ramp_mw is None
        and store.target_price is None
        and len(asked) == sum(row.price is None for row in instance.rows)
        and all(row.min_block <= 1 for row in asked)
        and (not days or all(any(_is_within(row, day) for day in days) for row in asked))
    )


def _can_be(deliveries: Deliveries) -> bool:
    """Tell whether energy and limits allow what is due; a store that more binds may still not do it."""
    store, rows = deliveries.store, deliveries.rows
    dues = [_due(row, deliveries.hours) for row in rows]
    if not _is_allowed(deliveries, dues):
        return False
    found = at_once(deliveries)
    if found.is_schedule and all(found.within(row) >= due for row, due in zip(rows, dues, strict=True)):
        return True
    final = store.final_floor_mwh if store.target_price is None else 0.0
    return bool(deliveries.most_mwh[-1, deliveries.due] >= final - EXACT_MWH)


def _is_allowed(deliveries: Deliveries, counts: Sequence[int]) -> bool:
    """Tell whether each day may discharge what so many intervals of each row need; excused ones need nothing."""
    needed = [
        max(0, count - len(row.excused.intersection(row.intervals))) * row.threshold_mw * deliveries.hours
        for row, count in zip(deliveries.rows, counts, strict=True)
    ]
    return all(
        sum(mwh for row, mwh in zip(deliveries.rows, needed, strict=True) if _is_within(row, day))
        <= day.amount + EXACT_MWH
        for day in deliveries.store.discharge_allowances
    )


def _is_within(row: HoursRow, day: DayAllowance) -> bool:
    return all(t in day.intervals for t in row.intervals)


def _due(row: HoursRow, hours: float) -> int:
    return max(0, whole_intervals(row.due_hours, hours))
