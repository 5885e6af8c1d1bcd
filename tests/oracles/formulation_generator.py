"""Write down generators: what CONTRACT section 3 and `initial`, `outages` of section 5 ask of them.

    min * on[t] <= P[t] <= M[t] * on[t],    cost[t] = h * (a * on[t] + b * P[t] + c * P[t]^2) + start cost
    start cost at t >= C[k] * (on[t] - on[t-1] - ... - on[t-n[k]]),   n[k] intervals make `after_hours_off` of entry k

M  maximum output with outages applied; less than the minimum left, the unit is off: a trip, which ends a run early
"""

from __future__ import annotations

from dataclasses import dataclass
from math import floor
from typing import Any

from tests.oracles.formulation_clock import Clock, Job, fractions, given
from tests.oracles.formulation_program import Affine, Program, total
from tests.oracles.formulation_reserve import add_reserve
from tests.oracles.formulation_storage import IDLE_MW, ROUNDING, Power, unbroken


@dataclass(frozen=True)
class Before:
    """Hold a generator's state before the window; `hours` is how long it has been on, or off."""

    on: bool
    output_mw: float
    hours: float

    def still_owed(self, intervals: int, clock: Clock) -> int:
        """Return how many of the `intervals` that state must last are left."""
        if self.hours == float("inf"):
            return 0
        return max(0, intervals - floor(self.hours / clock.hours + ROUNDING))


def before_window(job: Job, asset: dict[str, Any]) -> Before:
    """Read a generator's state; without any it has been off for longer than any limit asks."""
    state = given(given(job, "initial", {}), asset["id"])
    on = bool(given(state, "on", False))
    output = given(state, "output_mw", given(asset, "min_output_mw", 0.0)) if on else 0.0
    return Before(on, output, given(state, "hours_in_state", float("inf")))


def add_generator(program: Program, job: Job, asset: dict[str, Any], clock: Clock) -> Power:
    """Add a generator's columns, rows, costs and reserve; return its power."""
    least, most = given(asset, "min_output_mw", 0.0), asset["max_output_mw"]
    left = fractions(job, clock, asset["id"], "discharge")
    possible = [most * fraction >= max(least, IDLE_MW) - ROUNDING for fraction in left]
    before = before_window(job, asset)
    on = [program.binary(can) for can in possible]
    output = [program.column(0.0, most * fraction) for fraction in left]
    held = add_reserve(program, job, asset, clock, most)
    for t, fraction in enumerate(left):
        program.at_most(output[t] + held.power("up", t) - on[t] * (most * fraction), 0.0)
        program.at_least(output[t] - held.power("down", t) - on[t] * least, 0.0)
        if not possible[t]:
            program.equal(output[t], 0.0)
    _fuel(program, asset, clock, on, output)
    _starts(program, asset, clock, before, on)
    _up_and_down_times(program, asset, clock, before, on, possible)
    _ramps(program, asset, clock, before, on, output, [fraction < 1.0 for fraction in left])
    return Power(output, 0.0, held, on)


def _fuel(program: Program, asset: dict[str, Any], clock: Clock, on: list[Affine], output: list[Affine]) -> None:
    """Spend constant, linear and quadratic cost of each interval it runs."""
    cost, h = given(asset, "cost", {}), clock.hours
    for running, power in zip(on, output, strict=True):
        constant, linear = given(cost, "constant_per_hour", 0.0), given(cost, "linear_per_mwh", 0.0)
        program.earn((running * constant + power * linear) * -h)
        program.spend_square(power, running, h * given(cost, "quadratic_per_mw2h", 0.0))


def _starts(program: Program, asset: dict[str, Any], clock: Clock, before: Before, on: list[Affine]) -> None:
    """Spend for each start the dearest entry its hours off have reached: entries do not fall, so the last one."""
    entries, h = given(asset, "start_costs", []), clock.hours
    for t, running in enumerate(on):
        spent = program.column(0.0, max((entry["cost"] for entry in entries), default=0.0))
        for entry in entries:
            needed = max(1, clock.whole(entry["after_hours_off"]))
            reaches_back = not before.on and t * h + before.hours >= entry["after_hours_off"] - ROUNDING
            if t >= needed or reaches_back:
                recently = total(on[u] for u in range(max(0, t - needed), t))
                program.at_least(spent - (running - recently) * entry["cost"], 0.0)
        program.earn(spent * -1.0)


def _up_and_down_times(
    program: Program, asset: dict[str, Any], clock: Clock, before: Before, on: list[Affine], possible: list[bool]
) -> None:
    """Hold minimum up and down times, across the window's start, cut off at its end and up times at a trip."""
    up, down = (clock.whole(given(asset, key, 0.0)) for key in ("min_up_hours", "min_down_hours"))
    if before.on:
        for t in unbroken(possible, 0, before.still_owed(up, clock)):
            program.equal(on[t], 1.0)
    else:
        for t in range(min(len(on), before.still_owed(down, clock))):
            program.equal(on[t], 0.0)
    was = Affine({}, float(before.on))
    for t, running in enumerate(on):
        for later in unbroken(possible, t, up):
            program.at_least(on[later] - running + was, 0.0)
        for later in range(t, min(t + down, len(on))):
            program.at_most(on[later] + was - running, 1.0)
        was = running


def _ramps(
    program: Program,
    asset: dict[str, Any],
    clock: Clock,
    before: Before,
    on: list[Affine],
    output: list[Affine],
    lowered: list[bool],
) -> None:
    """Hold changes of output, first and last outputs of a run, but into an interval in which an outage lowers it."""
    least = given(asset, "min_output_mw", 0.0)
    for key, rising in (("ramp_up_mw_per_hour", True), ("ramp_down_mw_per_hour", False)):
        if given(asset, key) is None:
            continue
        ramp = asset[key] * clock.hours
        edge = max(least, ramp)
        was, power = Affine({}, float(before.on)), Affine({}, before.output_mw)
        for t, (running, now) in enumerate(zip(on, output, strict=True)):
            lower, higher, at_lower = (power, now, was) if rising else (now, power, running)
            if not lowered[t]:
                # Running at the lower end: by `ramp` at most; off there: `edge` at most.
                program.at_most(higher - lower - at_lower * (ramp - edge), edge)
            was, power = running, now
