"""Replay a schedule from the request and the decisions: what it does, what it earns, what it breaks.

margin = sales - purchases + reserve income + final energy value - costs - fees - peak charge
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from math import fsum

from schemas.fleet import Asset, FlexibleLoad, Generator, Renewable, Storage
from schemas.job import OneWindow
from schemas.schedule import (
    AssetSchedule,
    CommitmentResult,
    FleetSchedule,
    MeterSchedule,
    MeterTotals,
    Totals,
    Verification,
)
from workers.planning.audit.case import Case, open_case
from workers.planning.audit.commitments import replay_commitments
from workers.planning.audit.connections import check_connections
from workers.planning.audit.fixed_loads import replay_fixed_load
from workers.planning.audit.flexible_loads import replay_flexible_load
from workers.planning.audit.generators import replay_generator
from workers.planning.audit.lots import check_lots
from workers.planning.audit.meters import fleet_power, read_meters
from workers.planning.audit.renewables import replay_renewable
from workers.planning.audit.rows import Readings
from workers.planning.audit.set_points import Decision
from workers.planning.audit.settlement import settle
from workers.planning.audit.storage import replay_storage


@dataclass(frozen=True)
class Replay:
    """A schedule with every figure recomputed; `margin` and money in the window's currency.

    The totals of assets, meters and fleet add up to `totals`; only shortfalls of commitments belong to none of them.
    `interval_starts` carry the zone's offset.
    """

    margin: float
    totals: Totals
    assets: list[AssetSchedule]
    sites: list[MeterSchedule]
    fleet: FleetSchedule
    commitments: list[CommitmentResult]
    verification: Verification
    interval_starts: list[datetime]


def replay(job: OneWindow, decisions: Mapping[str, Decision]) -> Replay:
    """Return what the decisions lead to, by asset id; whatever they break is in `verification`, and never raised.

    The job is a validated one with fleet and window inline. Raises ValueError where it is not, NotAuditedError for a
    task this audit has no rule for. A fixed load may have no decision: it draws its forecast.
    """
    case = open_case(job)
    assets = _replay_assets(case, decisions)
    power_mw = {asset.id: asset.power_mw for asset in assets}
    meters = read_meters(case, power_mw)
    fleet_mw = fleet_power(meters)
    held = {asset.id: asset.reserve_mw for asset in assets}
    check_connections(case, meters, fleet_mw, held)
    check_lots(case, meters, fleet_mw)
    site_mw = {meter.id: meter.net_mw for meter in meters if meter.site is not None}
    by_id = {asset.id: asset for asset in case.fleet.assets}
    commitments, shortfall_costs = replay_commitments(case, Readings(by_id, power_mw, site_mw, fleet_mw, held))
    sites, fleet = settle(case, meters, fleet_mw)
    totals = _totals(assets, [*(site.totals for site in sites), fleet.totals], shortfall_costs)
    return Replay(
        margin=margin_of(totals),
        totals=totals,
        assets=assets,
        sites=sites,
        fleet=fleet,
        commitments=commitments,
        verification=case.ledger.verification(),
        interval_starts=case.clock.starts,
    )


def _replay_assets(case: Case, decisions: Mapping[str, Decision]) -> list[AssetSchedule]:
    found = [
        _replay_asset(case, place, asset, decisions.get(asset.id)) for place, asset in enumerate(case.fleet.assets)
    ]
    known = {asset.id for asset in case.fleet.assets}
    for name in decisions:
        if name not in known:
            text = f"{str(name)[:64]!r} is decided upon but is no asset of the fleet"
            case.ledger.report("asset_unknown", "/fleet/assets", 1.0, "assets", text)
    return found


def _replay_asset(case: Case, place: int, asset: Asset, decision: Decision | None) -> AssetSchedule:
    if isinstance(asset, Storage):
        return replay_storage(case, place, asset, decision)
    if isinstance(asset, Generator):
        return replay_generator(case, place, asset, decision)
    if isinstance(asset, Renewable):
        return replay_renewable(case, place, asset, decision)
    if isinstance(asset, FlexibleLoad):
        return replay_flexible_load(case, place, asset, decision)
    return replay_fixed_load(case, place, asset, decision)


def _totals(assets: Sequence[AssetSchedule], meters: Sequence[MeterTotals], shortfall_costs: list[float]) -> Totals:
    return Totals(
        sales=fsum(meter.sales for meter in meters),
        purchases=fsum(meter.purchases for meter in meters),
        fees=fsum(meter.fees for meter in meters),
        peak_import_charge=fsum(meter.peak_import_charge for meter in meters),
        reserve_income=fsum(asset.totals.reserve_income for asset in assets),
        fuel_cost=fsum(asset.totals.fuel_cost for asset in assets),
        start_cost=fsum(asset.totals.start_cost for asset in assets),
        wear_cost=fsum(asset.totals.wear_cost for asset in assets),
        final_energy_value=fsum(asset.totals.final_energy_value for asset in assets),
        shortfall_cost=fsum(shortfall_costs),
    )


def margin_of(totals: Totals) -> float:
    """Return what is left of the income after all costs, fees and charges."""
    income = (totals.sales, totals.reserve_income, totals.final_energy_value)
    costs = (
        totals.purchases,
        totals.wear_cost,
        totals.fuel_cost,
        totals.start_cost,
        totals.fees,
        totals.peak_import_charge,
        totals.shortfall_cost,
        totals.deviation_cost,
    )
    return fsum((*income, *(-cost for cost in costs)))
