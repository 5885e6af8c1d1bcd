"""Replay one generator: it is off, or on between its minimum and maximum output.

    on:  P_min <= p[t] <= P_max * available[t];  off:  p[t] = 0                        (1)
    fuel = sum over intervals on of h * (constant + linear * p[t] + quadratic * p[t]^2)   (2)

p    output, MW; h interval length in hours. Where outages leave less than the minimum output it must be off.
"""

from collections.abc import Sequence
from math import fsum, inf

from schemas.fleet import Generator
from schemas.schedule import AssetSchedule, AssetTotals
from workers.planning.audit.availability import read_availability
from workers.planning.audit.case import Case
from workers.planning.audit.generator_case import GeneratorCase, read_generator_start
from workers.planning.audit.generator_ramps import check_generator_ramps
from workers.planning.audit.generator_reserve import check_generator_reserve
from workers.planning.audit.generator_runs import check_up_and_down_times, runs_on, start_cost
from workers.planning.audit.ledger import figure, pointer
from workers.planning.audit.reserve import read_reserve, reserve_income
from workers.planning.audit.set_points import Decision, read_on, read_powers


def replay_generator(case: Case, place: int, generator: Generator, decision: Decision | None) -> AssetSchedule:
    """Return a generator's schedule with its money recomputed; breaches go to the case's ledger."""
    where = pointer("fleet", "assets", place)
    power = read_powers(generator.id, where, decision, [0.0] * case.clock.count, case.ledger)
    on = read_on(generator.id, where, decision, power, case.ledger)
    start = read_generator_start(generator, case.job.initial.get(generator.id))
    available = read_availability(case.outages.get(generator.id, ()), case.clock)
    most = [generator.max_output_mw] * case.clock.count
    if available is not None:
        most = [generator.max_output_mw * fraction for fraction in available.discharge.fraction]
    one = GeneratorCase(case, place, generator, power, on, start, available, most)
    _check_output(one)
    runs = runs_on(on)
    check_up_and_down_times(one, runs)
    check_generator_ramps(one)
    held = read_reserve(case, place, generator, decision)
    check_generator_reserve(one, held)
    totals = AssetTotals(
        fuel_cost=_fuel_cost(generator, power, on, case.clock.hours),
        start_cost=start_cost(one, runs),
        reserve_income=reserve_income(case, held),
    )
    return AssetSchedule(id=generator.id, power_mw=power, on=on, reserve_mw=held, totals=totals)


def _check_output(one: GeneratorCase) -> None:
    must_be_off = [is_on and not one.can_run(t) for t, is_on in enumerate(one.on)]
    one.case.ledger.checks += len(must_be_off)
    for t, is_out in enumerate(must_be_off):
        if is_out:
            _tell_out(one, t)
    least = one.generator.min_output_mw
    states = list(zip(one.on, must_be_off, strict=True))
    highest = [inf if out else (most if on else 0.0) for (on, out), most in zip(states, one.most_mw, strict=True)]
    one.case.ledger.at_most(one.power_mw, highest, lambda t, excess: _tell_above(one, t, excess))
    lowest = [inf if out else (-least if on else 0.0) for on, out in states]
    negated = [-mw for mw in one.power_mw]
    one.case.ledger.at_most(negated, lowest, lambda t, excess: _tell_below(one, t, excess))


def _tell_out(one: GeneratorCase, t: int) -> None:
    least = figure(one.generator.min_output_mw)
    text = f"{one.generator.id} is on from {one.since(t)}, where it has {figure(one.most_mw[t])} MW of at least {least}"
    outage = None if one.available is None else one.available.discharge.outage[t]
    where = pointer("fleet", "assets", one.place, "max_output_mw") if outage is None else pointer("outages", outage)
    one.case.ledger.report("must_be_off", where, 1.0, "intervals", text, asset=one.generator.id, interval=t)


def _tell_above(one: GeneratorCase, t: int, excess: float) -> None:
    running = f"{one.generator.id} runs at {figure(one.power_mw[t])} MW from {one.since(t)}"
    outage = None if one.available is None else one.available.discharge.outage[t]
    if not one.on[t]:
        _tell_off(one, t, excess, running)
    elif outage is None:
        text = f"{running}, {figure(excess)} MW above its maximum of {figure(one.most_mw[t])} MW"
        one.report("max_output", "max_output_mw", excess, "MW", text, interval=t)
    else:
        kind = one.case.job.outages[outage].kind
        whole = figure(one.generator.max_output_mw)
        text = f"{running} above the {figure(one.most_mw[t])} MW that a {kind} outage leaves of {whole} MW"
        where = pointer("outages", outage)
        one.case.ledger.report("max_output", where, excess, "MW", text, asset=one.generator.id, interval=t)


def _tell_below(one: GeneratorCase, t: int, missing: float) -> None:
    running = f"{one.generator.id} runs at {figure(one.power_mw[t])} MW from {one.since(t)}"
    if one.on[t]:
        text = f"{running}: {figure(one.generator.min_output_mw)} MW is the least"
        one.report("min_output", "min_output_mw", missing, "MW", text, interval=t)
    else:
        _tell_off(one, t, missing, running)


def _tell_off(one: GeneratorCase, t: int, excess: float, running: str) -> None:
    where = pointer("fleet", "assets", one.place)
    text = f"{running}, but it is off"
    one.case.ledger.report("off_with_output", where, excess, "MW", text, asset=one.generator.id, interval=t)


def _fuel_cost(generator: Generator, power: Sequence[float], on: Sequence[bool], hours: float) -> float:
    cost = generator.cost
    constant, linear, quadratic = cost.constant_per_hour, cost.linear_per_mwh, cost.quadratic_per_mw2h
    running = (mw for mw, is_on in zip(power, on, strict=True) if is_on)
    return hours * fsum(constant + linear * mw + quadratic * mw * mw for mw in running)
