"""Write down `hours_at_least` and `hours_at_most`: counts of intervals on one side of a threshold.

    at least   z[t] = 1 only where  power >= threshold + headroom, or t is excused
               g[t] <= z[t], g made of unbroken stretches of at least `min_block_hours`, all within the row
               h * sum(g) + counted before + shortfall >= hours
    at most    y[t] = 0 only where  power <= max(0, threshold - headroom), or t is excused
               h * sum(y) + counted before - excess <= hours

Headroom keeps the plan on the safe side of the threshold: above it where power is owed, below it where power
is not wanted.
"""

from __future__ import annotations

from tests.oracles.formulation_clock import given
from tests.oracles.formulation_program import INFINITE, Affine, Program, total
from tests.oracles.formulation_row import Row


def add_hours_at_least(program: Program, row: Row) -> None:
    """Ask for the hours, or pay for those that fall short."""
    asked = row.threshold_mw + row.headroom_mw
    counts: dict[int, Affine] = {}
    for t in row.intervals:
        counts[t] = program.binary()
        if t not in row.excused:
            slack = asked - program.smallest(row.power[t])
            program.at_least(row.power[t] - counts[t] * slack, asked - slack)
    _blocks(program, counts, row.clock.whole(given(row.commitment, "min_block_hours", 0.0)))
    owed = max(0.0, row.commitment["hours"] - row.credit)
    price = given(row.commitment, "shortfall_price_per_hour")
    shortfall = program.column(0.0, 0.0 if price is None else owed)
    program.at_least(total(counts.values()) * row.clock.hours + shortfall, owed)
    program.earn(shortfall * -(price or 0.0))


def add_hours_at_most(program: Program, row: Row) -> None:
    """Allow so many hours above the threshold, or charge for those in excess."""
    kept_below = max(0.0, row.threshold_mw - row.headroom_mw)
    above: list[Affine] = []
    for t in row.intervals:
        most = program.largest(row.power[t])
        if t in row.excused or most <= kept_below:
            continue
        above.append(program.binary())
        program.at_most(row.power[t] - above[-1] * (most - kept_below), kept_below)
    price = given(row.commitment, "shortfall_price_per_hour")
    excess = program.column(0.0, 0.0 if price is None else INFINITE)
    program.at_most(total(above) * row.clock.hours - excess, row.commitment["hours"] - row.credit)
    program.earn(excess * -(price or 0.0))


def _blocks(program: Program, counts: dict[int, Affine], length: int) -> None:
    """Let intervals count only in unbroken stretches of at least `length`, none of it outside the row."""
    if length <= 1:
        return
    for t, counted in counts.items():
        begin = program.column(0.0, 1.0)
        program.at_least(begin - counted + counts.get(t - 1, Affine({})), 0.0)
        for later in range(t, t + length):
            program.at_least(counts.get(later, Affine({})) - begin, 0.0)
