"""Read the reserve an asset holds: what it may hold, constant within each block, and what it earns.

    held[p,t] >= 0;  held[p,t] = held[p,b] for all t of a block that begins with b
    income = sum over products of h * price[p,t] * held[p,t]

All that is held earns, whether a commitment asks for it or not. Stores and generators hold reserve, nothing else does.
"""

from collections.abc import Mapping, Sequence
from math import fsum

from schemas.fleet import Asset, Generator, Storage
from workers.planning.audit.case import Case
from workers.planning.audit.ledger import IDLE_MW, at, figure, pointer, tolerated
from workers.planning.audit.reserve_market import Offer, total_mw
from workers.planning.audit.set_points import Decision, read_series

Held = Mapping[str, list[float]]
"""Reserve held by product, MW in each interval, none below 0."""


def read_reserve(case: Case, place: int, asset: Asset, decision: Decision | None) -> dict[str, list[float]]:
    """Return what an asset holds of each product; what it may not hold is reported and counts for nothing."""
    if decision is None or not decision.reserve_mw:
        return {}
    where = pointer("fleet", "assets", place)
    sent: object = decision.reserve_mw
    if not isinstance(sent, Mapping):
        text = f"{asset.id} has {str(sent)[:40]!r} for its reserve, which is no list of products"
        case.ledger.report("decision_unreadable", where, 1.0, "values", text, asset=asset.id)
        return {}
    held = {}
    for name, values in sent.items():
        case.ledger.checks += 1
        offer = case.offers.get(name) if isinstance(name, str) else None
        if offer is None:
            text = f"{asset.id} holds reserve of {str(name)[:64]!r}, which is no product of this window"
            case.ledger.report("reserve_product_unknown", where, 1.0, "products", text, asset=asset.id)
            continue
        series = _read_product(case, where, asset, offer, values)
        if _may_hold(case, place, asset, offer, series):
            _check_blocks(case, asset, offer, series)
            held[offer.product.id] = series
    return held


def _read_product(case: Case, where: str, asset: Asset, offer: Offer, values: object) -> list[float]:
    none = [0.0] * case.clock.count
    if isinstance(values, int | float):
        values = [values] * case.clock.count
    series = read_series(asset.id, where, f"figures of {offer.product.id}", values, none, case.ledger)

    def tell(t: int, excess: float) -> None:
        text = f"{asset.id} holds {figure(-excess)} MW of {offer.product.id} from {at(case.clock.starts[t])}"
        text = f"{text}: nothing below 0 can be held"
        case.ledger.report("reserve_negative", where, excess, "MW", text, asset=asset.id, interval=t)

    if min(series) < 0:
        case.ledger.at_most([-mw for mw in series], 0.0, tell)
        return [max(0.0, mw) for mw in series]
    return series


def _may_hold(case: Case, place: int, asset: Asset, offer: Offer, series: Sequence[float]) -> bool:
    if isinstance(asset, Storage | Generator):
        if asset.reserve_products is None or offer.product.id in asset.reserve_products:
            return True
        where, why = pointer("fleet", "assets", place, "reserve_products"), "which is none of its products"
    else:
        where, why = pointer("fleet", "assets", place, "kind"), f"which a {asset.kind} cannot"
    most = max(series)
    if most > IDLE_MW:
        text = f"{asset.id} holds up to {figure(most)} MW of {offer.product.id}, {why}"
        interval = next(t for t, mw in enumerate(series) if mw > IDLE_MW)
        case.ledger.report("reserve_not_allowed", where, most, "MW", text, asset=asset.id, interval=interval)
    return False


def _check_blocks(case: Case, asset: Asset, offer: Offer, series: Sequence[float]) -> None:
    case.ledger.checks += len(offer.blocks)
    for block in offer.blocks:
        first = series[block[0]]
        gaps = [abs(series[t] - first) for t in block]
        widest = max(gaps)
        if widest <= tolerated(first):
            case.ledger.let_pass(widest)
            continue
        t = block[next(k for k, gap in enumerate(gaps) if gap > tolerated(first))]
        change = f"{asset.id} holds {figure(first)} MW of {offer.product.id} from {at(case.clock.starts[block[0]])}"
        text = f"{change} and {figure(series[t])} MW from {at(case.clock.starts[t])}: within a block it is constant"
        where = pointer("window", "reserve_products", offer.place, "block_hours")
        case.ledger.report("reserve_block", where, widest, "MW", text, asset=asset.id, interval=t)


def reserve_income(case: Case, held: Held) -> float:
    """Return what the reserve of one asset earns."""
    return case.clock.hours * fsum(
        price * mw for name, series in held.items() for price, mw in zip(case.offers[name].price, series, strict=True)
    )


def power_held(offers: Sequence[Offer], held: Held) -> list[float] | None:
    """Return the power held of some products together, MW per interval; None where nothing is."""
    return total_mw([held[offer.product.id] for offer in offers if offer.product.id in held])


def energy_held(offers: Sequence[Offer], held: Held) -> list[float] | None:
    """Return the energy at the terminals that some products may ask for, MWh; None where nothing is held."""
    return total_mw(
        [[offer.sustained_hours * mw for mw in held[offer.product.id]] for offer in offers if offer.product.id in held]
    )
