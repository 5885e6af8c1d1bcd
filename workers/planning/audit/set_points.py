"""Read decisions: one finite power per interval, whatever was sent."""

from collections.abc import Iterable, Mapping, Sequence, Sized
from dataclasses import dataclass, field
from math import fsum, isfinite
from numbers import Real

from schemas.quantities import LARGEST
from workers.planning.audit.ledger import Ledger, at


@dataclass(frozen=True)
class Decision:
    """What was decided for one asset: power in MW per interval (positive into the grid), on or off, reserve held in MW.

    One net power per interval is all there is: a store that charges and discharges at once cannot be written down.
    """

    power_mw: Sequence[float]
    on: Sequence[bool] | None = None
    reserve_mw: Mapping[str, Sequence[float]] = field(default_factory=dict)


def read_powers(asset: str, where: str, decision: Decision | None, instead: list[float], ledger: Ledger) -> list[float]:
    """Return one power per interval; report what is missing or is no power, and take `instead` there.

    `where` points to the asset. A power beyond 1e9 MW is none that the contract carries.
    """
    ledger.checks += 1
    if decision is None:
        text = f"{asset} has no decision: it is taken as idle for the rest of this audit"
        ledger.report("decision_missing", where, float(len(instead)), "intervals", text, asset=asset)
        return instead
    for product in decision.reserve_mw or ():
        text = f"{asset} holds reserve of {product!r}, which is no product of this window"
        ledger.report("reserve_product_unknown", where, 1.0, "products", text, asset=asset)
    powers = decision.power_mw
    if _are_plain_powers(powers, len(instead)):
        return [float(power) for power in powers]
    return _mend(asset, where, powers, instead, ledger)


def _are_plain_powers(powers: object, count: int) -> bool:
    """Tell in a few passes at the speed of C whether there is nothing to report."""
    if not isinstance(powers, list | tuple) or len(powers) != count:
        return False
    try:
        return isfinite(fsum(powers)) and max(powers) <= LARGEST and min(powers) >= -LARGEST
    except (TypeError, ValueError, OverflowError):
        return False


def _mend(asset: str, where: str, powers: object, instead: list[float], ledger: Ledger) -> list[float]:
    # Other sequences, arrays among them, are taken too; what has no length may have no end.
    sent = list(powers) if isinstance(powers, Iterable) and isinstance(powers, Sized) else []
    if len(sent) != len(instead):
        text = f"{asset} has {len(sent)} powers for {len(instead)} intervals"
        missing = float(abs(len(sent) - len(instead)))
        ledger.report("decision_length", where, missing, "intervals", text, asset=asset)
    mended = list(instead)
    for t, value in enumerate(sent[: len(instead)]):
        power = _as_power(value)
        if power is None:
            text = (
                f"{asset} has {str(value)[:40]!r} in the interval from {at(ledger.starts[t])}, which is no power in MW"
            )
            ledger.report("decision_unreadable", where, 1.0, "values", text, asset=asset, interval=t)
        else:
            mended[t] = power
    return mended


def _as_power(value: object) -> float | None:
    if not isinstance(value, Real):
        return None
    try:
        power = float(value)
    except OverflowError:
        return None
    return power if abs(power) <= LARGEST else None
