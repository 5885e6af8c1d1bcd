"""Settle the meters: sales and purchases against what was sold already, fees, peak charge.

    sales     = sum of h * sell[t] * max(net[t] - position[t], 0)
    purchases = sum of h * buy[t] * max(position[t] - net[t], 0)
    fees      = sum of h * (import_fee * max(-net[t], 0) + export_fee * max(net[t], 0))
    peak      = charge * max(0, highest import - peak so far)

With negative prices sales and purchases may be negative. Fees and peak follow metered power, not the position.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import fsum

from schemas.fleet import Site
from schemas.schedule import FleetSchedule, MeterSchedule, MeterTotals
from workers.planning.audit.case import Case
from workers.planning.audit.clock import whole_series
from workers.planning.audit.meters import Meter


@dataclass(frozen=True)
class Prices:
    """What a MWh sold earns and a MWh bought costs, per interval."""

    sell_per_mwh: list[float]
    buy_per_mwh: list[float]


def read_prices(case: Case) -> Prices:
    """Return selling and buying prices; raise ValueError when the window has neither one price nor the pair."""
    window, count = case.window, case.clock.count
    if window.price_per_mwh is not None:
        prices = whole_series(window.price_per_mwh, count, "price_per_mwh")
        return Prices(prices, prices)
    if window.sell_price_per_mwh is None or window.buy_price_per_mwh is None:
        raise ValueError("the window has neither one price nor a buying and a selling price")
    return Prices(
        whole_series(window.sell_price_per_mwh, count, "sell_price_per_mwh"),
        whole_series(window.buy_price_per_mwh, count, "buy_price_per_mwh"),
    )


def settle(case: Case, meters: Sequence[Meter], fleet_mw: list[float]) -> tuple[list[MeterSchedule], FleetSchedule]:
    """Return the meters and the fleet with their money; each sum stands once, where the window settles it."""
    prices = read_prices(case)
    at_site = case.window.settled_at == "site"
    schedules = []
    for meter in meters:
        sales, purchases = _trade(case, prices, meter.id, meter.net_mw) if at_site else (0.0, 0.0)
        fees, peak = (0.0, 0.0) if meter.site is None else _charges(case, meter.site, meter.net_mw)
        totals = MeterTotals(sales=sales, purchases=purchases, fees=fees, peak_import_charge=peak)
        schedules.append(MeterSchedule(id=meter.id, power_mw=meter.net_mw, totals=totals))
    sales, purchases = (0.0, 0.0) if at_site else _trade(case, prices, "fleet", fleet_mw)
    return schedules, FleetSchedule(power_mw=fleet_mw, totals=MeterTotals(sales=sales, purchases=purchases))


def _trade(case: Case, prices: Prices, meter: str, net: Sequence[float]) -> tuple[float, float]:
    traded = net
    if meter in case.job.positions:
        sold = whole_series(case.job.positions[meter], case.clock.count, f"the position of {meter}")
        traded = [mw - already for mw, already in zip(net, sold, strict=True)]
    sales = fsum(price * mw for price, mw in zip(prices.sell_per_mwh, traded, strict=True) if mw > 0)
    purchases = fsum(price * -mw for price, mw in zip(prices.buy_per_mwh, traded, strict=True) if mw < 0)
    return case.clock.hours * sales, case.clock.hours * purchases


def _charges(case: Case, site: Site, net: Sequence[float]) -> tuple[float, float]:
    fees = peak = 0.0
    if site.import_fee_per_mwh or site.export_fee_per_mwh:
        imported = fsum(-mw for mw in net if mw < 0)
        exported = fsum(mw for mw in net if mw > 0)
        fees = case.clock.hours * (site.import_fee_per_mwh * imported + site.export_fee_per_mwh * exported)
    if site.peak_import_charge_per_mw:
        before = case.job.counted_before.sites.get(site.id)
        so_far = 0.0 if before is None else before.peak_import_mw
        peak = site.peak_import_charge_per_mw * max(0.0, -min(net) - so_far)
    return fees, peak
