"""Replay one store: its energy follows from its power, and both stay within what was asked.

    s[t] = s[t-1] * (1-f)^h + h * (eta_c * c[t] - d[t] / eta_d)                        (1)
    -c_max[t] <= p[t] <= d_max[t],  p[t] = 0 or >= d_min or <= -c_min                  (2)
    floor[t] <= s[t] <= ceiling[t],  s[last] >= final target                           (3)
    sum of h * d[t] over a day <= max(0, cycles * capacity - discharged before)        (4)

p    net power at the terminals, MW; d = max(p, 0), c = max(-p, 0), so the two exclude each other by what they are
s    energy in the store at the end of interval t, MWh; h interval length in hours; f fraction lost per hour
"""

from collections.abc import Sequence
from functools import partial
from math import fsum

from schemas.fleet import Storage
from schemas.schedule import AssetSchedule, AssetTotals
from workers.planning.audit.availability import Left, read_availability
from workers.planning.audit.case import Case
from workers.planning.audit.initial import ceiling_mwh, final_target_mwh, floor_mwh, kept_per_interval, read_start
from workers.planning.audit.ledger import IDLE_MW, at, figure, pointer
from workers.planning.audit.movement import check_ramps
from workers.planning.audit.reserve import read_reserve, reserve_income
from workers.planning.audit.runs import check_runs
from workers.planning.audit.set_points import Decision, read_powers
from workers.planning.audit.storage_reserve import check_storage_reserve
from workers.planning.audit.store_case import StoreCase

_BEYOND_ANY_STORE_MWH = 1e100
"""Where efficiencies near 0 and absurd powers would end in infinities, which no answer may carry."""


def replay_storage(case: Case, place: int, store: Storage, decision: Decision | None) -> AssetSchedule:
    """Return a store's schedule with energy and money recomputed; breaches go to the case's ledger."""
    idle = [0.0] * case.clock.count
    power = read_powers(store.id, pointer("fleet", "assets", place), decision, idle, case.ledger)
    start = read_start(store, case.job, case.clock)
    available = read_availability(case.outages.get(store.id, ()), case.clock)
    one = StoreCase(case, place, store, power, start, available)
    if start.is_held_out:
        _check_held_out(one)
    else:
        _check_power_limits(one)
        _check_minimum_powers(one)
        check_ramps(one)
        check_runs(one)
    stored = stored_energy(store, start.stored_mwh, power, case.clock.hours)
    _check_stored_energy(one, stored)
    _check_cycles(one)
    target = final_target_mwh(store, start, case.job, case.clock)
    if target is not None:
        _check_final_target(one, stored[-1], target)
    held = read_reserve(case, place, store, decision)
    check_storage_reserve(one, stored, held)
    totals = AssetTotals(
        wear_cost=_wear_cost(one),
        final_energy_value=_final_energy_value(one, stored[-1], target),
        reserve_income=reserve_income(case, held),
    )
    return AssetSchedule(id=store.id, power_mw=power, stored_mwh=stored, reserve_mw=held, totals=totals)


def stored_energy(store: Storage, start_mwh: float, power: Sequence[float], hours: float) -> list[float]:
    """Return the energy at the end of each interval by equation (1), MWh, wherever it leads: below 0 or above full."""
    kept = kept_per_interval(store, hours)
    per_mw_out = hours / store.discharge_efficiency
    per_mw_in = hours * store.charge_efficiency
    stored = []
    energy = start_mwh
    for mw in power:
        energy = energy * kept - mw * (per_mw_out if mw > 0 else per_mw_in)
        stored.append(energy)
    if min(stored) < -_BEYOND_ANY_STORE_MWH:
        return [energy if energy > -_BEYOND_ANY_STORE_MWH else -_BEYOND_ANY_STORE_MWH for energy in stored]
    return stored


def _check_held_out(one: StoreCase) -> None:
    def tell(t: int, excess: float) -> None:
        running = f"{one.store.id} runs at {figure(one.power_mw[t])} MW from {one.since(t)}"
        text = f"{running}, but it is held out: its stored energy is unknown"
        one.case.ledger.report("hold_out", "/missing_initial", excess, "MW", text, asset=one.store.id, interval=t)

    one.case.ledger.at_most([abs(mw) for mw in one.power_mw], 0.0, tell)


def _check_power_limits(one: StoreCase) -> None:
    out, into = (None, None) if one.available is None else (one.available.discharge, one.available.charge)
    _check_power_limit(one, "discharge", one.power_mw, one.store.discharge_limit_mw, out)
    _check_power_limit(one, "charge", [-mw for mw in one.power_mw], one.store.charge_limit_mw, into)


def _check_power_limit(one: StoreCase, verb: str, values: Sequence[float], limit: float, left: Left | None) -> None:
    def tell(t: int, excess: float) -> None:
        running = f"{one.store.id} {verb}s {figure(values[t])} MW from {one.since(t)}, {figure(excess)} MW above"
        outage = None if left is None else left.outage[t]
        if left is None or outage is None:
            text = f"{running} its limit of {figure(limit)} MW"
            one.report(f"{verb}_limit", f"{verb}_limit_mw", excess, "MW", text, interval=t)
            return
        kind = one.case.job.outages[outage].kind
        text = f"{running} the {figure(limit * left.fraction[t])} MW that a {kind} outage leaves of {figure(limit)} MW"
        where = pointer("outages", outage)
        one.case.ledger.report(f"{verb}_limit", where, excess, "MW", text, asset=one.store.id, interval=t)

    asked = limit if left is None else [limit * fraction for fraction in left.fraction]
    one.case.ledger.at_most(values, asked, tell)


def _check_minimum_powers(one: StoreCase) -> None:
    for verb, least, sign in (
        ("discharge", one.store.min_discharge_mw, 1.0),
        ("charge", one.store.min_charge_mw, -1.0),
    ):
        if least <= 0:
            continue
        for t, mw in enumerate(one.power_mw):
            running = mw * sign
            if running > IDLE_MW and not one.case.ledger.is_held(least - running, least):
                text = (
                    f"{one.store.id} {verb}s {figure(running)} MW from {one.since(t)}: {figure(least)} MW is the least"
                )
                one.report(f"min_{verb}", f"min_{verb}_mw", least - running, "MW", text, interval=t)


def _check_stored_energy(one: StoreCase, stored: Sequence[float]) -> None:
    clock = one.case.clock

    def tell(member: str, bound: str, t: int, excess: float) -> None:
        text = f"{one.store.id} holds {figure(stored[t])} MWh at {at(clock.end_of(t))}, {figure(excess)} MWh {bound}"
        one.report(member.removesuffix("_mwh"), member, excess, "MWh", text, interval=t)

    floor = floor_mwh(one.store, one.start, clock)
    negated = -floor if isinstance(floor, int | float) else [-mwh for mwh in floor]
    one.case.ledger.at_most([-mwh for mwh in stored], negated, partial(tell, "min_stored_mwh", "below its floor"))
    ceiling = ceiling_mwh(one.store, one.start, clock)
    one.case.ledger.at_most(stored, ceiling, partial(tell, "max_stored_mwh", "above its ceiling"))


def _check_cycles(one: StoreCase) -> None:
    cycles, capacity = one.store.max_cycles_per_day, one.store.energy_capacity_mwh
    if cycles is None:
        return
    most = cycles * capacity
    before = one.case.job.counted_before.assets.get(one.store.id)
    for day, members in one.case.clock.days.items():
        discharged = one.case.clock.hours * fsum(one.power_mw[t] for t in members if one.power_mw[t] > 0)
        had = before.discharged_mwh if before is not None and day == one.case.clock.first_day else 0.0
        # A day that had more than it may has nothing left; what it had is a fact, and no fault of the schedule.
        left = max(0.0, most - had)
        if not one.case.ledger.is_held(discharged - left, most):
            allowed = f"{figure(cycles)} cycles of {figure(capacity)} MWh allow {figure(most)} MWh"
            text = f"{one.store.id} discharges {figure(had + discharged)} MWh on {day}: {allowed}"
            member = "max_cycles_per_day"
            one.report(member, member, discharged - left, "MWh", text, interval=members[0])


def _check_final_target(one: StoreCase, final_mwh: float, target_mwh: float) -> None:
    missing = target_mwh - final_mwh
    if one.case.ledger.is_held(missing, target_mwh):
        return
    due = f"{figure(missing)} MWh less than the {figure(target_mwh)} MWh due"
    text = f"{one.store.id} ends with {figure(final_mwh)} MWh, {due}"
    where = pointer("targets", one.store.id, "final_stored_mwh")
    last = one.case.clock.count - 1
    one.case.ledger.report("final_stored", where, missing, "MWh", text, asset=one.store.id, interval=last)


def _wear_cost(one: StoreCase) -> float:
    if not one.store.wear_cost_per_mwh:
        return 0.0
    return one.store.wear_cost_per_mwh * one.case.clock.hours * fsum(mw for mw in one.power_mw if mw > 0)


def _final_energy_value(one: StoreCase, final_mwh: float, target_mwh: float | None) -> float:
    target = one.case.job.targets.get(one.store.id)
    if target is None or target.final_value_per_mwh is None or target_mwh is None:
        return 0.0
    return target.final_value_per_mwh * (final_mwh - target_mwh)
