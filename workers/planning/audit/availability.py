"""Work out what outages leave of an asset in each interval."""

from collections.abc import Sequence
from dataclasses import dataclass

from schemas.job import Outage
from workers.planning.audit.clock import Clock


@dataclass(frozen=True)
class Left:
    """What outages leave in one direction, per interval: a fraction, and the outage behind it by its place."""

    fraction: list[float]
    outage: list[int | None]


@dataclass(frozen=True)
class Availability:
    """What outages leave of an asset, per interval; `is_lowered` where they take anything in either direction."""

    discharge: Left
    charge: Left
    is_lowered: list[bool]


def read_availability(outages: Sequence[tuple[int, Outage]], clock: Clock) -> Availability | None:
    """Return what the outages of one asset leave of it; None where it has none in this window.

    Where outages overlap the smallest fraction holds; of equal ones the first in the request is named.
    """
    stretches = [(place, outage, clock.touched_by(outage.from_, outage.to)) for place, outage in outages]
    stretches = [stretch for stretch in stretches if stretch[2]]
    if not stretches:
        return None
    discharge = _least([(_discharge_fraction(o), place, hit) for place, o, hit in stretches], clock.count)
    charge = _least([(_charge_fraction(o), place, hit) for place, o, hit in stretches], clock.count)
    lowered = [d < 1 or c < 1 for d, c in zip(discharge.fraction, charge.fraction, strict=True)]
    return Availability(discharge, charge, lowered)


def _least(stretches: list[tuple[float, int, range]], count: int) -> Left:
    left = Left([1.0] * count, [None] * count)
    # Written from the largest fraction to the smallest: what is written last is what holds.
    for fraction, place, hit in sorted(stretches, key=lambda stretch: (-stretch[0], -stretch[1])):
        if fraction < 1:
            left.fraction[hit.start : hit.stop] = [fraction] * len(hit)
            left.outage[hit.start : hit.stop] = [place] * len(hit)
    return left


def _discharge_fraction(outage: Outage) -> float:
    return _effective(outage.available_discharge_fraction, outage.available_fraction, outage.available_charge_fraction)


def _charge_fraction(outage: Outage) -> float:
    return _effective(outage.available_charge_fraction, outage.available_fraction, outage.available_discharge_fraction)


def _effective(own: float | None, both: float | None, other: float | None) -> float:
    """Return the fraction of one direction: its own, else the common one; untouched where only the other is named."""
    if own is not None:
        return own
    if both is not None:
        return both
    return 0.0 if other is None else 1.0
