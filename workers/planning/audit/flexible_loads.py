"""Replay one flexible load: it draws the energy of each need within it, and nothing outside.

    0 <= c[t] <= draw_limit * available_fraction[t];  drawing:  c[t] >= min_draw        (1)
    sum of h * c[t] over the intervals of a need = its energy;  c[t] = 0 in no need     (2)
    not interruptible: the intervals of a need with draw are one unbroken stretch       (3)

c = -p  draw, MW; h interval length in hours
"""

from collections.abc import Sequence
from itertools import pairwise
from math import fsum

from schemas.fleet import FlexibleLoad
from schemas.schedule import AssetSchedule
from workers.planning.audit.availability import read_availability
from workers.planning.audit.case import Case
from workers.planning.audit.ledger import IDLE_MW, at, figure, pointer
from workers.planning.audit.reserve import read_reserve
from workers.planning.audit.set_points import Decision, read_powers


def replay_flexible_load(case: Case, place: int, load: FlexibleLoad, decision: Decision | None) -> AssetSchedule:
    """Return a flexible load's schedule; breaches go to the case's ledger."""
    where = pointer("fleet", "assets", place)
    power = read_powers(load.id, where, decision, [0.0] * case.clock.count, case.ledger)
    read_reserve(case, place, load, decision)
    draw = [-mw for mw in power]
    _check_draw(case, where, load, draw)
    needs = [case.clock.starting_within(need.from_, need.to) for need in case.job.energy_needs.get(load.id, ())]
    _check_outside(case, load, draw, needs)
    for number, members in enumerate(needs):
        _check_need(case, load, draw, number, members)
        if not load.interruptible:
            _check_unbroken(case, where, load, draw, members)
    return AssetSchedule(id=load.id, power_mw=power)


def _check_draw(case: Case, where: str, load: FlexibleLoad, draw: Sequence[float]) -> None:
    available = read_availability(case.outages.get(load.id, ()), case.clock)

    def above(t: int, excess: float) -> None:
        outage = None if available is None else available.charge.outage[t]
        text = f"{_drawing(case, load, draw, t)}, {figure(excess)} MW above its limit of {figure(draw[t] - excess)} MW"
        place = f"{where}/draw_limit_mw" if outage is None else pointer("outages", outage)
        case.ledger.report("draw_limit", place, excess, "MW", text, asset=load.id, interval=t)

    def below(t: int, excess: float) -> None:
        text = f"{_drawing(case, load, draw, t)}: a load feeds nothing into the grid"
        case.ledger.report("feeds_power", where, excess, "MW", text, asset=load.id, interval=t)

    limit = load.draw_limit_mw
    left = limit if available is None else [limit * fraction for fraction in available.charge.fraction]
    case.ledger.at_most(draw, left, above)
    case.ledger.at_most([-mw for mw in draw], 0.0, below)
    if load.min_draw_mw <= 0:
        return
    for t, mw in enumerate(draw):
        if mw > IDLE_MW and not case.ledger.is_held(load.min_draw_mw - mw, load.min_draw_mw):
            text = f"{_drawing(case, load, draw, t)}: {figure(load.min_draw_mw)} MW is the least"
            missing = load.min_draw_mw - mw
            case.ledger.report("min_draw", f"{where}/min_draw_mw", missing, "MW", text, asset=load.id, interval=t)


def _check_outside(case: Case, load: FlexibleLoad, draw: Sequence[float], needs: Sequence[range]) -> None:
    inside = {t for members in needs for t in members}
    if len(inside) == len(draw):
        return
    for t, mw in enumerate(draw):
        if t not in inside and mw > 0 and not case.ledger.is_held(mw, 0.0):
            text = f"{_drawing(case, load, draw, t)}, where it needs nothing"
            where = pointer("energy_needs", load.id)
            case.ledger.report("outside_needs", where, mw, "MW", text, asset=load.id, interval=t)


def _check_need(case: Case, load: FlexibleLoad, draw: Sequence[float], number: int, members: range) -> None:
    need = case.job.energy_needs[load.id][number]
    drawn = case.clock.hours * fsum(draw[t] for t in members)
    gap = abs(drawn - need.energy_mwh)
    if not case.ledger.is_held(gap, need.energy_mwh):
        text = (
            f"{load.id} draws {figure(drawn)} MWh of the {figure(need.energy_mwh)} MWh it needs, {figure(gap)} MWh off"
        )
        where = pointer("energy_needs", load.id, number, "energy_mwh")
        case.ledger.report("energy_need", where, gap, "MWh", text, asset=load.id)


def _check_unbroken(case: Case, where: str, load: FlexibleLoad, draw: Sequence[float], members: range) -> None:
    case.ledger.checks += 1
    drawing = [t for t in members if draw[t] > IDLE_MW]
    breaks = [t for before, t in pairwise(drawing) if t != before + 1]
    if breaks:
        text = f"{load.id} draws again from {at(case.clock.starts[breaks[0]])} after a break: it cannot be interrupted"
        place = f"{where}/interruptible"
        amount = float(len(breaks))
        case.ledger.report("interruptible", place, amount, "breaks", text, asset=load.id, interval=breaks[0])


def _drawing(case: Case, load: FlexibleLoad, draw: Sequence[float], t: int) -> str:
    return f"{load.id} draws {figure(draw[t])} MW from {at(case.clock.starts[t])}"
