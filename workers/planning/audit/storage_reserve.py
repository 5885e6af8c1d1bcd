"""Check that a store can deliver the reserve it holds: by its power limits, and by what it has stored.

    p[t] + up[t] <= d_max[t],  p[t] - down[t] >= -c_max[t]                              (1)
    sum of up * hours / eta_d <= min(s[t-1], s[t]) - floor[t]                           (2)
    sum of down * hours * eta_c <= ceiling[t] - max(s[t-1], s[t])                       (3)

up, down: sums over products, a symmetric one in both; hours: for how long a product must last once called. Minimum
powers, ramps and run times do not bind what is called.
"""

from collections.abc import Sequence
from math import inf

from workers.planning.audit.availability import Left
from workers.planning.audit.initial import ceiling_mwh, floor_mwh
from workers.planning.audit.ledger import figure
from workers.planning.audit.reserve import Held, energy_held, power_held
from workers.planning.audit.reserve_market import down_offers, total_mw, up_offers
from workers.planning.audit.store_case import StoreCase


def check_storage_reserve(one: StoreCase, stored: Sequence[float], held: Held) -> None:
    """Check up- and down-reserve of one store; `stored` is the energy at the end of each interval."""
    if not held:
        return
    if one.start.is_held_out:
        _check_held_out(one, total_mw(list(held.values())) or ())
        return
    before = [one.start.stored_mwh, *stored[:-1]]
    ups, downs = up_offers(one.case.offers), down_offers(one.case.offers)
    up, down = power_held(ups, held), power_held(downs, held)
    up_mwh, down_mwh = energy_held(ups, held), energy_held(downs, held)
    out, into = (None, None) if one.available is None else (one.available.discharge, one.available.charge)
    if up is not None and up_mwh is not None:
        _check_power(one, "up", up, one.power_mw, _limits(one.store.discharge_limit_mw, out, len(up)))
        floor = _series(floor_mwh(one.store, one.start, one.case.clock), len(up))
        room = [min(b, e) - least for b, e, least in zip(before, stored, floor, strict=True)]
        _check_energy(one, "up", [mwh / one.store.discharge_efficiency for mwh in up_mwh], room)
    if down is not None and down_mwh is not None:
        negated = [-mw for mw in one.power_mw]
        _check_power(one, "down", down, negated, _limits(one.store.charge_limit_mw, into, len(down)))
        ceiling = _series(ceiling_mwh(one.store, one.start, one.case.clock), len(down))
        room = [most - max(b, e) for b, e, most in zip(before, stored, ceiling, strict=True)]
        _check_energy(one, "down", [mwh * one.store.charge_efficiency for mwh in down_mwh], room)


def _series(bound: float | Sequence[float], count: int) -> Sequence[float]:
    return [bound] * count if isinstance(bound, int | float) else bound


def _limits(limit: float, left: Left | None, count: int) -> Sequence[float]:
    return [limit] * count if left is None else [limit * fraction for fraction in left.fraction]


def _check_held_out(one: StoreCase, reserve: Sequence[float]) -> None:
    def tell(t: int, excess: float) -> None:
        text = f"{one.store.id} holds {figure(reserve[t])} MW of reserve from {one.since(t)}, but it is held out"
        where = "/missing_initial"
        one.case.ledger.report("hold_out", where, excess, "MW", text, asset=one.store.id, interval=t)

    one.case.ledger.at_most(reserve, 0.0, tell)


def _check_power(
    one: StoreCase, way: str, reserve: Sequence[float], running: Sequence[float], limits: Sequence[float]
) -> None:
    """Check power in the direction of the reserve, and the reserve on top of it, where any is held."""
    called = [mw + more for mw, more in zip(running, reserve, strict=True)]
    asked = [limit if mw > 0 else inf for limit, mw in zip(limits, reserve, strict=True)]

    def tell(t: int, excess: float) -> None:
        holding = f"{one.store.id} holds {figure(reserve[t])} MW of {way}-reserve from {one.since(t)}"
        text = f"{holding} at {figure(one.power_mw[t])} MW, {figure(excess)} MW beyond its limit"
        member = "discharge_limit_mw" if way == "up" else "charge_limit_mw"
        one.report(f"reserve_{way}_power", member, excess, "MW", text, interval=t)

    one.case.ledger.at_most(called, asked, tell)


def _check_energy(one: StoreCase, way: str, needed: Sequence[float], room: Sequence[float]) -> None:
    asked = [left if mwh > 0 else inf for left, mwh in zip(room, needed, strict=True)]

    def tell(t: int, excess: float) -> None:
        takes = f"{figure(needed[t])} MWh of {'stored energy' if way == 'up' else 'room'}"
        holding = f"{one.store.id} holds {way}-reserve from {one.since(t)} that takes {takes}"
        text = f"{holding}, {figure(excess)} MWh more than it has through the interval"
        member = "min_stored_mwh" if way == "up" else "max_stored_mwh"
        one.report(f"reserve_{way}_energy", member, excess, "MWh", text, interval=t)

    one.case.ledger.at_most(needed, asked, tell)
