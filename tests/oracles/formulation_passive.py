"""Write down renewables, fixed loads and flexible loads.

renewable      0 <= P[t] <= forecast[t] * available          (equal where it cannot be curtailed)
fixed load     draw[t] = forecast[t] * available
flexible load  sum over a need's intervals of h * draw[t] = its energy,   nothing outside needs
"""

from __future__ import annotations

from typing import Any

from tests.oracles.formulation_clock import Clock, Job, fractions, given, series
from tests.oracles.formulation_program import Affine, Program, total
from tests.oracles.formulation_storage import IDLE_MW, ROUNDING, Power


def add_renewable(program: Program, job: Job, asset: dict[str, Any], clock: Clock) -> Power:
    """Add a renewable and what its energy costs; return its power."""
    left = fractions(job, clock, asset["id"], "discharge")
    available = [mw * f for mw, f in zip(series(job["forecasts"][asset["id"]], len(clock)), left, strict=True)]
    if given(asset, "curtailable", True):
        power = [program.column(0.0, mw) for mw in available]
    else:
        power = [Affine({}, mw) for mw in available]
    program.earn(total(power) * (-clock.hours * given(asset, "cost_per_mwh", 0.0)))
    return Power(power, 0.0)


def fixed_load(job: Job, asset: dict[str, Any], clock: Clock) -> Power:
    """Return a load that draws its forecast, scaled by what outages leave of it."""
    drawn = series(job["forecasts"][asset["id"]], len(clock))
    left = fractions(job, clock, asset["id"], "charge")
    return Power([Affine({}, -mw * fraction) for mw, fraction in zip(drawn, left, strict=True)], 0.0)


def add_flexible_load(program: Program, job: Job, asset: dict[str, Any], clock: Clock) -> Power:
    """Add a flexible load, each of its needs met exactly; return its power."""
    draw = [Affine({}) for _ in range(len(clock))]
    left = fractions(job, clock, asset["id"], "charge")
    least = given(asset, "min_draw_mw", 0.0)
    for need in given(given(job, "energy_needs"), asset["id"], []):
        within = clock.inside(given(need, "from"), given(need, "to"))
        drawing: list[Affine] = []
        for t in within:
            limit = asset["draw_limit_mw"] * left[t]
            on = program.binary(limit >= max(least, IDLE_MW) - ROUNDING)
            draw[t] = program.column(0.0, limit)
            program.at_most(draw[t] - on * limit, 0.0)
            program.at_least(draw[t] - on * least, 0.0)
            drawing.append(on)
        program.equal(total(draw[t] for t in within) * clock.hours, need["energy_mwh"])
        if not given(asset, "interruptible", True):
            _one_stretch(program, drawing)
    return Power([power * -1.0 for power in draw], 0.0)


def _one_stretch(program: Program, drawing: list[Affine]) -> None:
    """Let drawing begin once at most."""
    before, begins = Affine({}), []
    for on in drawing:
        begin = program.column(0.0, 1.0)
        program.at_least(begin - on + before, 0.0)
        begins.append(begin)
        before = on
    program.at_most(total(begins), 1.0)
