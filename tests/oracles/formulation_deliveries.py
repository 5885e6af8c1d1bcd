"""Write down commitments on amounts: firm power, energy, reserve held.

    firm delivery     power[t] + short[t] >= due[t]      short[t] is priced as due[t] - max(power[t], 0), at least 0
    energy            sum of h * max(power[t], 0) + counted before  at least (at most) `energy_mwh`
    reserve holding   held[t] + short[t] >= due[t]

`max(power, 0)` is no convex function of the powers where more of it is better, so a binary tells its sides apart.
"""

from __future__ import annotations

from tests.oracles.formulation_clock import given, series
from tests.oracles.formulation_program import INFINITE, Affine, Program, total
from tests.oracles.formulation_row import Row


def add_firm_delivery(program: Program, row: Row) -> None:
    """Ask for the power due in each interval, or pay for the energy that falls short of it."""
    due = series(row.commitment["power_mw"], len(row.clock))
    price = given(row.commitment, "shortfall_price_per_mwh")
    for t in row.intervals:
        if due[t] <= 0 or t in row.excused:
            continue
        if price is None:
            program.at_least(row.power[t], due[t])
            continue
        short = program.column(0.0, due[t])
        program.at_least(positive_part_from_below(program, row.power[t]) + short, due[t])
        program.earn(short * (-price * row.clock.hours))


def add_energy_at_least(program: Program, row: Row) -> None:
    """Ask for the energy, or pay for what falls short of it."""
    delivered = total(positive_part_from_below(program, row.power[t]) for t in row.intervals)
    owed = max(0.0, row.commitment["energy_mwh"] - row.credit)
    price = given(row.commitment, "shortfall_price_per_mwh")
    shortfall = program.column(0.0, 0.0 if price is None else owed)
    program.at_least(delivered * row.clock.hours + shortfall, owed)
    program.earn(shortfall * -(price or 0.0))


def add_energy_at_most(program: Program, row: Row) -> None:
    """Allow the energy, or charge for what exceeds it."""
    delivered: list[Affine] = []
    for t in row.intervals:
        delivered.append(program.column(0.0, max(0.0, program.largest(row.power[t]))))
        program.at_least(delivered[-1] - row.power[t], 0.0)
    price = given(row.commitment, "shortfall_price_per_mwh")
    excess = program.column(0.0, 0.0 if price is None else INFINITE)
    program.at_most(total(delivered) * row.clock.hours - excess, row.commitment["energy_mwh"] - row.credit)
    program.earn(excess * -(price or 0.0))


def add_reserve_holding(program: Program, row: Row) -> None:
    """Ask for the reserve due in each interval, or pay for what is not held."""
    due = series(row.commitment["power_mw"], len(row.clock))
    price = given(row.commitment, "shortfall_price_per_mw_per_hour")
    for t in row.intervals:
        short = program.column(0.0, 0.0 if price is None else due[t])
        program.at_least(row.reserve[t] + short, due[t])
        program.earn(short * (-(price or 0.0) * row.clock.hours))


def positive_part_from_below(program: Program, power: Affine) -> Affine:
    """Return an expression that is at most `max(power, 0)` and can reach it."""
    least, most = program.smallest(power), program.largest(power)
    if least >= 0:
        return power
    if most <= 0:
        return Affine({})
    part, positive = program.column(0.0, most), program.binary()
    program.at_most(part - power - positive * least, -least)
    program.at_most(part - positive * most, 0.0)
    return part
