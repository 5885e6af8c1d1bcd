"""Check how fast a generator changes its output.

    on before and now:     p[t] - p[t-1] <= up * h,  p[t-1] - p[t] <= down * h
    first interval of run: p[t] <= max(P_min, up * h)
    last interval of run:  p[t] <= max(P_min, down * h)

p[-1] is the output of the interval before the window. A run that the window's end cuts off has no last interval. Into
an interval in which an outage lowers what the generator can do none of these bind; out of it, they do.
"""

from collections.abc import Sequence
from math import inf

from workers.planning.audit.generator_case import GeneratorCase
from workers.planning.audit.ledger import figure


def check_generator_ramps(one: GeneratorCase) -> None:
    """Check output against both ramps, the first interval against the window's start."""
    generator = one.generator
    if generator.ramp_up_mw_per_hour is None and generator.ramp_down_mw_per_hour is None:
        return
    power_before = [one.start.output_mw, *one.power_mw[:-1]]
    on_before = [one.start.was_on, *one.on[:-1]]
    if generator.ramp_up_mw_per_hour is not None:
        _check_ramp(one, "up", generator.ramp_up_mw_per_hour, (one.power_mw, one.on), (power_before, on_before))
    if generator.ramp_down_mw_per_hour is not None:
        # Coming down is going up with time turned round: from what is now to what was before.
        _check_ramp(one, "down", generator.ramp_down_mw_per_hour, (power_before, on_before), (one.power_mw, one.on))


Side = tuple[Sequence[float], Sequence[bool]]


def _check_ramp(one: GeneratorCase, way: str, ramp: float, high: Side, low: Side) -> None:
    """Check how far the higher side lies above the lower one; where the lower side is off, above nothing."""
    most = ramp * one.case.clock.hours
    most_from_off = max(one.generator.min_output_mw, most)
    lowered = [False] * len(one.on) if one.available is None else one.available.is_lowered
    steps = zip(high[0], high[1], low[0], low[1], strict=True)
    rises = [(mw - other if other_on else mw) if is_on else 0.0 for mw, is_on, other, other_on in steps]
    limits = [
        inf if is_lowered or not is_on else (most if other_on else most_from_off)
        for is_lowered, is_on, other_on in zip(lowered, high[1], low[1], strict=True)
    ]

    def tell(t: int, excess: float) -> None:
        output = f"{one.generator.id} goes {way} by {figure(rises[t])} MW at {one.since(t)}"
        text = f"{output}, {figure(excess)} MW more than the {figure(limits[t])} MW its ramp allows there"
        one.report(f"ramp_{way}", f"ramp_{way}_mw_per_hour", excess, "MW", text, interval=t)

    one.case.ledger.at_most(rises, limits, tell)
