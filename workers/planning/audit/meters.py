"""Add up what each meter reads: a site, or an asset without one.

net[m,t] = sum over the meter's assets of p[a,t] - sum over its stores of standby[a]
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from math import fsum

from schemas.fleet import Asset, Site, Storage
from workers.planning.audit.case import Case


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
