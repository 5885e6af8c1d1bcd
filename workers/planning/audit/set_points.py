"""Read decisions: one finite number per interval, whatever was sent."""

from collections.abc import Iterable, Mapping, Sequence, Sized
from dataclasses import dataclass, field
from math import fsum, isfinite
from numbers import Real

from schemas.quantities import LARGEST
from workers.planning.audit.ledger import IDLE_MW, Ledger, at


@dataclass(frozen=True)
class Decision:
    """What was decided for one asset: power in MW per interval (positive into the grid), on or off, reserve held in MW.

    One net power per interval is all there is: a store that charges and discharges at once cannot be written down.
    Reserve by product: one number per interval, or one for all. `on` None: on with power above 1e-6 MW.
    """

    power_mw: Sequence[float]
    on: Sequence[bool] | None = None
    reserve_mw: Mapping[str, Sequence[float] | float] = field(default_factory=dict)


def read_powers(asset: str, where: str, decision: Decision | None, instead: list[float], ledger: Ledger) -> list[float]:
    """Return one power per interval; report what is missing or is no power, and take `instead` there.

    `where` points to the asset. A power beyond 1e9 MW is none that the contract carries.
    """
    ledger.checks += 1
    if decision is None:
        taken = "at its forecast" if any(instead) else "as idle"
        text = f"{asset} has no decision: it is taken {taken} for the rest of this audit"
        ledger.report("decision_missing", where, float(len(instead)), "intervals", text, asset=asset)
        return instead
    return read_series(asset, where, "powers", decision.power_mw, instead, ledger)


def read_series(asset: str, where: str, what: str, values: object, instead: list[float], ledger: Ledger) -> list[float]:
    """Return one finite number per interval; report what is none, and take `instead` there."""
    if isinstance(values, list | tuple) and _are_plain(values, len(instead)):
        return [float(value) for value in values]
    # Other sequences, arrays among them, are taken too; what has no length may have no end.
    sent = list(values) if isinstance(values, Iterable) and isinstance(values, Sized) else []
    _check_length(asset, where, what, len(sent), len(instead), ledger)
    mended = list(instead)
    for t, value in enumerate(sent[: len(instead)]):
        power = _as_power(value)
        if power is None:
            _tell_unreadable(asset, where, value, "no power in MW", t, ledger)
        else:
            mended[t] = power
    return mended


def read_on(asset: str, where: str, decision: Decision | None, power: Sequence[float], ledger: Ledger) -> list[bool]:
    """Return for each interval whether a generator is on; report what is neither, and go by its power there."""
    by_power = [mw > IDLE_MW for mw in power]
    if decision is None or decision.on is None:
        return by_power
    ledger.checks += 1
    values: object = decision.on
    sent = list(values) if isinstance(values, Iterable) and isinstance(values, Sized) else []
    _check_length(asset, where, "entries of on or off", len(sent), len(power), ledger)
    for t, value in enumerate(sent[: len(power)]):
        if isinstance(value, bool):
            by_power[t] = value
        else:
            _tell_unreadable(asset, where, value, "neither true nor false", t, ledger)
    return by_power


def _are_plain(values: Sequence[float], count: int) -> bool:
    """Tell in a few passes at the speed of C whether there is nothing to report."""
    if len(values) != count:
        return False
    try:
        return isfinite(fsum(values)) and max(values) <= LARGEST and min(values) >= -LARGEST
    except (TypeError, ValueError, OverflowError):
        return False


def _check_length(asset: str, where: str, what: str, sent: int, count: int, ledger: Ledger) -> None:
    if sent != count:
        text = f"{asset} has {sent} {what} for {count} intervals"
        ledger.report("decision_length", where, float(abs(sent - count)), "intervals", text, asset=asset)


def _tell_unreadable(asset: str, where: str, value: object, fault: str, t: int, ledger: Ledger) -> None:
    text = f"{asset} has {str(value)[:40]!r} in the interval from {at(ledger.starts[t])}, which is {fault}"
    ledger.report("decision_unreadable", where, 1.0, "values", text, asset=asset, interval=t)


def _as_power(value: object) -> float | None:
    if not isinstance(value, Real):
        return None
    try:
        power = float(value)
    except OverflowError:
        return None
    return power if abs(power) <= LARGEST else None
