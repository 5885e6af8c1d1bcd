"""How much a store can still hold after so many delivered intervals, and how much it needs for those still due.

    most[t+1, n]  = min(ceiling[t], max(k * most[t, n] + in[t], k * most[t, n-1] - out[t]))         (1)
    least[t, n]   = max(floor[t-1], min(least[t+1, n] - in[t], least[t+1, n+1] + out[t]) / k)       (2)

n        intervals counted so far, no more than are due; one that counts delivers what it must, and no more
most     most energy in store at the start of interval t, MWh; minus infinity where no schedule is there
least    least energy with which the rest can still be delivered and the final target be met; infinity where it cannot
in, out  most that an interval can charge; what one that counts takes from the store, MWh. An excused one takes nothing
k        share of stored energy that is left after an interval

More in store is never worse, for charging can be left out: so (1) and (2) are exact for a store that has neither least
powers nor states, ramps or limits behind a meter, and bounds for any other. It is the recursion of a dynamic programme
over the count (Bellman, Dynamic Programming, 1957; from memory), with the energy as its value.
"""

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from workers.planning.rows import HoursRow
from workers.planning.store import Store, whole_intervals
from workers.planning.units import Booleans, Floats

INFINITE = float("inf")
EXACT_MWH = 1e-9
"""Rounding of sums of energies, MWh."""

REACH_MW = 1e-8
"""A limit this little below the threshold still reaches it for a solver."""


@dataclass(frozen=True)
class Deliveries:
    """Rows of hours of discharge of one store, one after the other in time, over T intervals of `hours`.

    `counts` says where an interval may count, `excused` where it does whatever the power, T values each; `taken_mwh` is
    what one that counts takes from the store. `lowest` and `highest`, T + 1 values, are the counts that must, and can,
    be reached by the start of each interval and the end.
    """

    store: Store
    rows: tuple[HoursRow, ...]
    hours: float
    counts: Booleans
    excused: Booleans
    taken_mwh: Floats
    lowest: NDArray[np.int64]
    highest: NDArray[np.int64]

    @property
    def intervals(self) -> int:
        """Number of intervals T."""
        return len(self.counts)

    @property
    def due(self) -> int:
        """Intervals due in all rows together."""
        return int(self.highest[-1])

    @property
    def charged_mwh(self) -> Floats:
        """Most that an interval can charge, MWh, T values."""
        return self.store.most_in_mw * (self.hours * self.store.charge_efficiency)

    @cached_property
    def most_mwh(self) -> Floats:
        """Most energy in store by (1), MWh, by interval start (and the end) and count: (T + 1, due + 1) values."""
        store, kept, due = self.store, self.store.kept, self.due
        most = np.full((self.intervals + 1, due + 1), -INFINITE)
        most[0, 0] = store.most_initial_mwh
        steps = zip(*(each.tolist() for each in self._figures()), strict=True)
        for t, (charged, taken, floor, ceiling, counts, excused, lowest, highest) in enumerate(steps):
            before = most[t] * kept
            full = before + charged
            after = most[t + 1]
            after[:] = full
            if counts:
                np.maximum(after[1:], full[:-1] if excused else before[:-1] - taken, out=after[1:])
            np.minimum(after, ceiling, out=after)
            after[after < floor - EXACT_MWH] = -INFINITE
            after[:lowest] = -INFINITE
            after[highest + 1 :] = -INFINITE
        return most

    @cached_property
    def least_mwh(self) -> Floats:
        """Least energy in store by (2), MWh, by interval start (and the end) and count: (T + 1, due + 1) values."""
        store, kept, due = self.store, self.store.kept, self.due
        least = np.full((self.intervals + 1, due + 1), INFINITE)
        final = store.final_floor_mwh if store.target_price is None else 0.0
        least[-1, due] = max(final, float(store.floor_mwh[-1]))
        steps = list(zip(*(each.tolist() for each in self._figures()), strict=True))
        for t in range(self.intervals - 1, -1, -1):
            charged, taken, _, ceiling, counts, excused, _, _ = steps[t]
            after = np.where(least[t + 1] <= ceiling + EXACT_MWH, least[t + 1], INFINITE)
            full = after - charged
            before = full.copy()
            if counts:
                np.minimum(before[:-1], full[1:] if excused else after[1:] + taken, out=before[:-1])
            before /= kept
            np.maximum(before, store.floor_mwh[t - 1] if t else 0.0, out=least[t])
            least[t, : self.lowest[t]] = INFINITE
            least[t, self.highest[t] + 1 :] = INFINITE
        return least

    def _figures(self) -> tuple[NDArray[np.generic], ...]:
        store = self.store
        return (
            self.charged_mwh,
            self.taken_mwh,
            store.floor_mwh,
            store.ceiling_mwh,
            self.counts,
            self.excused,
            self.lowest[1:],
            self.highest[1:],
        )


def deliveries_of(store: Store, rows: Iterable[HoursRow], hours: float, intervals: int) -> Iterator[Deliveries]:
    """Put binding rows of one store's hours of discharge in as few sequences as their intervals allow."""
    sequences: list[list[HoursRow]] = []
    for row in sorted(rows, key=lambda row: row.intervals[:1]):
        if not row.intervals:
            continue
        after = next((known for known in sequences if known[-1].intervals[-1] < row.intervals[0]), None)
        if after is None:
            sequences.append([row])
        else:
            after.append(row)
    for sequence in sequences:
        yield in_sequence(store, sequence, hours, intervals)


def in_sequence(store: Store, rows: Sequence[HoursRow], hours: float, intervals: int) -> Deliveries:
    """Take rows of one store's hours of discharge that follow each other in time; none where nothing is asked."""
    counts, excused = np.zeros(intervals, dtype=bool), np.zeros(intervals, dtype=bool)
    taken = np.zeros(intervals)
    lowest, highest = np.zeros(intervals + 1, dtype=np.int64), np.zeros(intervals + 1, dtype=np.int64)
    for row in rows:
        where, due = np.array(row.intervals), max(0, whole_intervals(row.due_hours, hours))
        excused[where] = np.isin(where, list(row.excused))
        counts[where] = excused[where] | (store.most_out_mw[where] >= row.threshold_mw - REACH_MW)
        taken[where] = row.threshold_mw * hours / store.discharge_efficiency
        highest[row.intervals[0] + 1 :] += due
        lowest[row.intervals[-1] + 1 :] += due
    return Deliveries(store, tuple(rows), hours, counts, excused, taken, lowest, highest)


@dataclass(frozen=True)
class AtOnce:
    """Where a store counts that delivers whenever it can and charges elsewhere, T values.

    `is_schedule` tells whether it stays above its floor and meets its final target.
    """

    counted: Booleans
    is_schedule: bool

    def within(self, row: HoursRow) -> int:
        """Give how many intervals of a row count."""
        return int(self.counted[list(row.intervals)].sum())


def at_once(deliveries: Deliveries) -> AtOnce:
    """Deliver as early as possible, with as much kept back as the final target needs."""
    store, charged = deliveries.store, deliveries.charged_mwh
    kept_back = np.maximum(store.floor_mwh, store.final_floor_mwh - (charged.sum() - np.cumsum(charged)))
    stored, counted, is_above = store.most_initial_mwh, [], True
    figures = (
        charged,
        deliveries.taken_mwh,
        kept_back,
        store.floor_mwh,
        store.ceiling_mwh,
        deliveries.counts,
        deliveries.excused,
    )
    for into, taken, back, floor, ceiling, counts, excused in zip(*(each.tolist() for each in figures), strict=True):
        stored *= store.kept
        delivers = counts and not excused and stored - taken >= back
        stored = stored - taken if delivers else min(stored + into, ceiling)
        is_above = is_above and floor - EXACT_MWH <= stored <= ceiling + EXACT_MWH
        counted.append(delivers or excused)
    is_schedule = is_above and stored >= store.final_floor_mwh - EXACT_MWH
    return AtOnce(np.array(counted, dtype=bool), is_schedule)
