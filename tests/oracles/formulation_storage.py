"""Write down one store: what CONTRACT section 3 and `initial`, `targets`, `outages` of section 5 ask of it.

    s[t] = s[t-1] * (1 - f)^h + h * (eta_c * c[t] - d[t] / eta_d)
    min_c * uc[t] <= c[t] <= C[t] * uc[t],   min_d * ud[t] <= d[t] <= D[t] * ud[t],   uc[t] + ud[t] <= 1

c,d    charging and discharging power at the terminals, MW; uc,ud are binaries
C,D    power limits with outages applied; a direction with less than its minimum power left is impossible
s      energy in the store at the end of an interval, MWh; h hours per interval; f share lost per hour
"""

from __future__ import annotations

from dataclasses import dataclass, field
from math import ceil
from typing import Any

from tests.oracles.formulation_clock import Clock, Job, fractions, given
from tests.oracles.formulation_program import Affine, Program, total
from tests.oracles.formulation_reserve import Reserve, add_reserve

IDLE_MW = 1e-6
ROUNDING = 1e-9


@dataclass(frozen=True)
class Opening:
    """Hold a store's state at the window's start. `stored_mwh` None: held out, its energy is not known."""

    stored_mwh: float | None
    power_mw: float
    intervals_in_state: float


@dataclass(frozen=True)
class Power:
    """Hold an asset's net power at its terminals, MW, positive = into the grid, and its standby load at the meter.

    `reserve` is what it holds of each product; `on` a generator's state in each interval.
    """

    net: list[Affine]
    standby_load_mw: float
    reserve: Reserve = field(default_factory=Reserve)
    on: list[Affine] | None = None


@dataclass(frozen=True)
class Level:
    """Hold the energy in a store at the start and the end of one interval, and the bounds of that interval, MWh."""

    at_start: Affine
    at_end: Affine
    floor: float
    ceiling: float


def opening(job: Job, asset: dict[str, Any], clock: Clock) -> Opening:
    """Read a store's state at the start, in the contract's defaults.

    Raises ValueError where it is missing and `missing_initial` refuses, or where it is more than 2 % above capacity.
    """
    state = given(given(job, "initial", {}), asset["id"])
    capacity = asset["energy_capacity_mwh"]
    if state is None:
        rule = given(job, "missing_initial", "refuse")
        if rule == "refuse":
            raise ValueError(f"{asset['id']} has no initial")
        middle = (given(asset, "min_stored_mwh", 0.0) + given(asset, "max_stored_mwh", capacity)) / 2.0
        return Opening(middle if rule == "assume_middle" else None, 0.0, float("inf"))
    stored = given(state, "stored_mwh")
    if stored is None:
        stored = state["state_of_charge_percent"] / 100.0 * capacity
    if stored > capacity * 1.02 * (1.0 + ROUNDING):
        raise ValueError(f"{asset['id']} holds more than 2 % above its capacity")
    hours = given(state, "hours_in_state", float("inf"))
    return Opening(min(stored, capacity), given(state, "power_mw", 0.0), hours / clock.hours)


def add_storage(
    program: Program, job: Job, asset: dict[str, Any], clock: Clock, *, has_free_energy: bool = False
) -> Power:
    """Add a store's columns, rows, wear and final energy; return its power.

    With `has_free_energy` it starts with any energy of its range, and what `initial` says widens no bound.
    """
    start = opening(job, asset, clock)
    limits, possible = {}, {}
    lowered = [False] * len(clock)
    for direction in ("charge", "discharge"):
        rated = asset[f"{direction}_limit_mw"]
        left = [0.0] * len(clock) if start.stored_mwh is None else fractions(job, clock, asset["id"], direction)
        limits[direction] = [rated * fraction for fraction in left]
        least = given(asset, f"min_{direction}_mw", 0.0)
        possible[direction] = [limit > IDLE_MW and limit >= least - ROUNDING for limit in limits[direction]]
        lowered = [was or (fraction < 1.0 and rated > 0) for was, fraction in zip(lowered, left, strict=True)]
    power: dict[str, list[Affine]] = {}
    on: dict[str, list[Affine]] = {}
    for direction in ("charge", "discharge"):
        on[direction] = [program.binary(can) for can in possible[direction]]
        power[direction] = []
        for t, limit in enumerate(limits[direction]):
            flow = program.column(0.0, limit)
            program.at_most(flow - on[direction][t] * limit, 0.0)
            program.at_least(flow - on[direction][t] * min(given(asset, f"min_{direction}_mw", 0.0), limit), 0.0)
            power[direction].append(flow)
    for t in range(len(clock)):
        program.at_most(on["charge"][t] + on["discharge"][t], 1.0)
    net = [d - c for d, c in zip(power["discharge"], power["charge"], strict=True)]
    held = Reserve()
    if start.stored_mwh is not None:
        levels = _energy(program, job, asset, clock, None if has_free_energy else start.stored_mwh, power)
        held = add_reserve(program, job, asset, clock, asset["charge_limit_mw"] + asset["discharge_limit_mw"])
        _deliverable(program, asset, limits, net, levels, held)
    _cycles(program, job, asset, clock, power["discharge"])
    _ramps(program, asset, clock, start, net, lowered)
    _runs(program, job, asset, clock, start, on, possible)
    program.earn(total(power["discharge"]) * (-clock.hours * given(asset, "wear_cost_per_mwh", 0.0)))
    return Power(net, given(asset, "standby_load_mw", 0.0), held)


def _energy(
    program: Program,
    job: Job,
    asset: dict[str, Any],
    clock: Clock,
    at_start: float | None,
    power: dict[str, list[Affine]],
) -> list[Level]:
    """Follow the energy in the store; hold it between its bounds and at or above its final target.

    `at_start` None: whatever in its range serves best, which a bound never has to give way to.
    """
    levels = []
    kept = (1.0 - given(asset, "self_discharge_per_hour", 0.0)) ** clock.hours
    low, high = given(asset, "min_stored_mwh", 0.0), given(asset, "max_stored_mwh", asset["energy_capacity_mwh"])
    stored = low if at_start is None else at_start
    idle, level = stored, program.column(low, high) if at_start is None else Affine({}, stored)
    for t in range(len(clock)):
        idle = idle * kept
        # Energy outside the range at the start widens the bound it breaks to what an idle store would still hold.
        floor = min(low, idle) if stored < low else low
        ceiling = max(high, idle) if stored > high else high
        column = program.column(floor, ceiling)
        gained = power["charge"][t] * asset["charge_efficiency"]
        lost = power["discharge"][t] * (1.0 / asset["discharge_efficiency"])
        program.equal(column - level * kept - (gained - lost) * clock.hours, 0.0)
        levels.append(Level(level, column, floor, ceiling))
        level = column
    target = given(given(job, "targets", {}), asset["id"])
    least = given(target, "final_stored_mwh", min(stored, idle))
    program.at_least(level, least)
    program.earn(level.plus(-least) * given(target, "final_value_per_mwh", 0.0))
    return levels


def _deliverable(
    program: Program,
    asset: dict[str, Any],
    limits: dict[str, list[float]],
    net: list[Affine],
    levels: list[Level],
    held: Reserve,
) -> None:
    """Hold only reserve that power limits and the energy at the start and the end of each interval could serve."""
    if not held.products:
        return
    for t, level in enumerate(levels):
        program.at_most(net[t] + held.power("up", t), limits["discharge"][t])
        program.at_least(net[t] - held.power("down", t), -limits["charge"][t])
        drained = held.energy("up", t) * (1.0 / asset["discharge_efficiency"])
        filled = held.energy("down", t) * asset["charge_efficiency"]
        for stored in (level.at_start, level.at_end):
            program.at_most(drained - stored, -level.floor)
            if program.largest(stored) <= level.ceiling + ROUNDING:
                program.at_most(filled + stored, level.ceiling)
                continue
            # The ceiling falls towards `max_stored_mwh` with what an idle store would lose: at the start of an
            # interval the store may lie above the interval's own ceiling, and then holds nothing downwards.
            holding, above = program.binary(), program.largest(stored) - level.ceiling
            program.at_most(filled + stored + holding * above, level.ceiling + above)
            program.at_most(filled - holding * program.largest(filled), 0.0)


def _cycles(program: Program, job: Job, asset: dict[str, Any], clock: Clock, discharge: list[Affine]) -> None:
    """Hold the energy discharged in each local day at or below `max_cycles_per_day` times the capacity."""
    cycles = given(asset, "max_cycles_per_day")
    if cycles is None:
        return
    before = given(_counted(job, asset), "discharged_mwh", 0.0)
    for day in clock.days().values():
        allowed = max(0.0, cycles * asset["energy_capacity_mwh"] - before)
        program.at_most(total(discharge[t] for t in day) * clock.hours, allowed)
        before = 0.0


def _ramps(
    program: Program,
    asset: dict[str, Any],
    clock: Clock,
    start: Opening,
    net: list[Affine],
    lowered: list[bool],
) -> None:
    """Hold the change of net power between neighbours, but into an interval in which an outage lowers the asset."""
    ramp = given(asset, "ramp_mw_per_hour")
    if ramp is None:
        return
    before = Affine({}, start.power_mw)
    for t, now in enumerate(net):
        if not lowered[t]:
            program.at_most(now - before, ramp * clock.hours)
            program.at_least(now - before, -ramp * clock.hours)
        before = now


def _runs(
    program: Program,
    job: Job,
    asset: dict[str, Any],
    clock: Clock,
    start: Opening,
    on: dict[str, list[Affine]],
    possible: dict[str, list[bool]],
) -> None:
    """Hold minimum run and rest times and the starts per day, across the window's start and cut off at its end."""
    run, rest = (clock.whole(given(asset, key, 0.0)) for key in ("min_run_hours", "min_rest_hours"))
    most = given(asset, "max_starts_per_day")
    if run == 0 and rest == 0 and most is None:
        return
    count = len(clock)
    begins: list[Affine] = [Affine({}) for _ in range(count)]
    was = {"charge": start.power_mw < -IDLE_MW, "discharge": start.power_mw > IDLE_MW}
    for direction, states in on.items():
        before = Affine({}, 1.0 if was[direction] else 0.0)
        owed = max(0.0, run - start.intervals_in_state) if was[direction] else 0.0
        for t in unbroken(possible[direction], 0, ceil(owed - ROUNDING)):
            program.at_least(states[t], 1.0)
        for t in range(count):
            # `begin` is at least 1 where a run begins, `end` where one has ended just before; neither earns anything.
            begin, end = program.column(0.0, 1.0), program.column(0.0, 1.0)
            program.at_least(begin - states[t] + before, 0.0)
            program.at_least(end - before + states[t], 0.0)
            for later in unbroken(possible[direction], t, run):
                program.at_least(states[later] - begin, 0.0)
            for later in range(t, min(t + rest, count)):
                program.at_most(on["charge"][later] + on["discharge"][later] + end, 1.0)
            begins[t] = begins[t] + begin
            before = states[t]
    if not any(was.values()):
        left = max(0.0, rest - start.intervals_in_state)
        for t in range(min(count, ceil(left - ROUNDING))):
            program.at_most(on["charge"][t] + on["discharge"][t], 0.0)
    if most is not None:
        used = given(_counted(job, asset), "starts", 0)
        for day in clock.days().values():
            program.at_most(total(begins[t] for t in day), max(0.0, most - used))
            used = 0


def unbroken(possible: list[bool], first: int, length: int) -> list[int]:
    """Return `length` intervals from `first` on, cut at the window's end and where the direction is impossible."""
    found: list[int] = []
    for t in range(first, min(first + length, len(possible))):
        if not possible[t]:
            break
        found.append(t)
    return found


def _counted(job: Job, asset: dict[str, Any]) -> dict[str, Any] | None:
    counted: dict[str, Any] | None = given(given(given(job, "counted_before"), "assets"), asset["id"])
    return counted
