"""A day of one asset or meter in a line: a sign and a digit for each hour."""

from collections.abc import Sequence
from datetime import datetime
from itertools import groupby

IDLE_MW = 1e-6
"""Up to this power an asset counts as idle (contract, section 1)."""

FULL = 0.95

LEGEND = (
    "Each hour's mean power in tenths of the limit that way (where there is none, of the day's highest): "
    "+5 is half of it out to the grid, -5 half of it drawn; F is 95 % or more, 0 under 5 %, a dot idle. Hours that go "
    "both ways show what is left in the end: >5 out, <5 drawn."
)


def hours_of(interval_starts: Sequence[datetime]) -> list[range]:
    """Return the intervals of each hour of the clock, in order; an hour that a clock change repeats comes twice."""
    # With the offset: times of one zone compare by their wall time alone, which a clock change repeats.
    whole = [(start.replace(minute=0, second=0, microsecond=0), start.utcoffset()) for start in interval_starts]
    found, first = [], 0
    for _, members in groupby(whole):
        count = len(list(members))
        found.append(range(first, first + count))
        first += count
    return found


def ruler(interval_starts: Sequence[datetime]) -> str:
    """Write the clock over a strip: every other hour by its two digits."""
    hours = hours_of(interval_starts)
    marks = (f"{interval_starts[hour[0]]:%H}" if place % 2 == 0 else "  " for place, hour in enumerate(hours))
    return "".join(marks)


def strip(power_mw: Sequence[float], hours: Sequence[range], out_limit_mw: float, in_limit_mw: float) -> str:
    """Draw a day, two characters an hour; power is positive into the grid, limits are positive and may be infinite."""
    out_scale = out_limit_mw if 0 < out_limit_mw < float("inf") else max(power_mw)
    in_scale = in_limit_mw if 0 < in_limit_mw < float("inf") else -min(power_mw)
    return "".join(_mark([power_mw[t] for t in hour], out_scale, in_scale) for hour in hours)


def _mark(powers: Sequence[float], out_scale: float, in_scale: float) -> str:
    goes_out, comes_in = max(powers) > IDLE_MW, min(powers) < -IDLE_MW
    if not goes_out and not comes_in:
        return " ."
    mean = sum(powers) / len(powers)
    share = abs(mean) / (out_scale if mean > 0 else in_scale) if mean else 0.0
    signs = "<>" if goes_out and comes_in else "-+"
    return signs[mean > 0] + ("F" if share >= FULL else f"{int(10 * share + 0.5)}")
