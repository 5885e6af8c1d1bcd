"""Add up what each meter reads, and check the connections.

    net[m,t] = sum over the meter's assets of p[a,t] - sum over its stores of standby[a]
    -import_limit[m,t] <= net[m,t] <= export_limit[m,t], for each site and for the fleet

A meter is a site, or an asset without a site, which has no limit. Today's limits stand in place of the fleet's.
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from math import fsum

from schemas.fleet import Asset, Site, Storage
from schemas.job import TodaysLimits
from workers.planning.audit.case import Case
from workers.planning.audit.clock import whole_series
from workers.planning.audit.ledger import at, figure, pointer


@dataclass(frozen=True)
class Meter:
    """One meter: its id, its site (None: an asset of its own), and its net power in MW, positive into the grid."""

    id: str
    site: Site | None
    net_mw: list[float]


def net_power(members: Iterable[Asset], power_mw: Mapping[str, Sequence[float]], count: int) -> list[float]:
    """Return the net sum of some assets per interval as a meter would read it, standby loads included, MW."""
    assets = list(members)
    rows = [power_mw[asset.id] for asset in assets]
    standby = fsum(asset.standby_load_mw for asset in assets if isinstance(asset, Storage))
    if standby:
        rows.append([-standby] * count)
    if len(rows) == 1:
        return list(rows[0])
    return [fsum(column) for column in zip(*rows, strict=True)] if rows else [0.0] * count


def read_meters(case: Case, power_mw: Mapping[str, Sequence[float]]) -> list[Meter]:
    """Return all meters: the sites in the fleet's order, then the assets without one.

    Raises ValueError when an asset stands on a site that the fleet does not have.
    """
    members: dict[str, list[Asset]] = {site.id: [] for site in case.fleet.sites}
    alone = []
    for asset in case.fleet.assets:
        if asset.site is None:
            alone.append(asset)
        elif asset.site in members:
            members[asset.site].append(asset)
        else:
            raise ValueError(f"{asset.id} stands on {asset.site}, which is no site of the fleet")
    count = case.clock.count
    sites = [Meter(site.id, site, net_power(members[site.id], power_mw, count)) for site in case.fleet.sites]
    return sites + [Meter(asset.id, None, net_power([asset], power_mw, count)) for asset in alone]


def fleet_power(meters: Sequence[Meter]) -> list[float]:
    """Return the power of the whole fleet per interval, MW."""
    return [fsum(column) for column in zip(*(meter.net_mw for meter in meters), strict=True)]


def check_connections(case: Case, meters: Sequence[Meter], fleet_mw: Sequence[float]) -> None:
    """Check export and import of each site and of the fleet against the limits that hold today."""
    for place, meter in enumerate(meters):
        if meter.site is not None:
            standing = (meter.site.export_limit_mw, meter.site.import_limit_mw)
            _check(case, meter.id, ("fleet", "sites", place), standing, meter.net_mw)
    _check(case, None, ("fleet",), (case.fleet.export_limit_mw, case.fleet.import_limit_mw), fleet_mw)


def _check(
    case: Case,
    site: str | None,
    place: tuple[str | int, ...],
    standing: tuple[float | None, float | None],
    net: Sequence[float],
) -> None:
    name = "fleet" if site is None else site
    today = case.job.limits.get(name, TodaysLimits())
    exported = (net, standing[0], today.export_limit_mw)
    imported = ([-mw for mw in net], standing[1], today.import_limit_mw)
    for verb, (values, limit, limit_today) in (("export", exported), ("import", imported)):
        member = f"{verb}_limit_mw"
        if limit_today is not None:
            limits: float | Sequence[float] = whole_series(limit_today, case.clock.count, f"{member} of {name}")
            where = pointer("limits", name, member)
        elif limit is not None:
            limits = limit
            where = pointer(*place, member)
        else:
            continue
        case.ledger.at_most(values, limits, partial(_tell, case, site, verb, where, values))


def _tell(case: Case, site: str | None, verb: str, where: str, values: Sequence[float], t: int, excess: float) -> None:
    flow = f"{site or 'the fleet'} {verb}s {figure(values[t])} MW from {at(case.clock.starts[t])}"
    text = f"{flow}, {figure(excess)} MW above its limit of {figure(values[t] - excess)} MW"
    case.ledger.report(f"{verb}_limit", where, excess, "MW", text, site=site, interval=t)
