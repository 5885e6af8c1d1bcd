"""Check how fast a store changes its power.

    |p[t] - p[t-1]| <= ramp * h,  p[-1] the power of the interval before the window

Into an interval in which an outage lowers what the store can do this does not bind; out of it, it does.
"""

from math import inf

from workers.planning.audit.ledger import figure
from workers.planning.audit.store_case import StoreCase


def check_ramps(one: StoreCase) -> None:
    """Check the change of net power between neighbouring intervals, the first against the window's start."""
    if one.store.ramp_mw_per_hour is None:
        return
    most = one.store.ramp_mw_per_hour * one.case.clock.hours
    before = [one.start.power_mw, *one.power_mw[:-1]]

    def tell(t: int, excess: float) -> None:
        change = f"{one.store.id} goes from {figure(before[t])} to {figure(one.power_mw[t])} MW at {one.since(t)}"
        text = f"{change}, {figure(excess)} MW more than the {figure(most)} MW its ramp allows between intervals"
        one.report("ramp", "ramp_mw_per_hour", excess, "MW", text, interval=t)

    changes = [abs(now - then) for now, then in zip(one.power_mw, before, strict=True)]
    limits = most if one.available is None else [inf if lowered else most for lowered in one.available.is_lowered]
    one.case.ledger.at_most(changes, limits, tell)
