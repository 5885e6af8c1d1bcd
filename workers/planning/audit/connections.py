"""Check what flows through the connections, and what would flow if all reserve were called.

    -import_limit[m,t] <= net[m,t] <= export_limit[m,t]                                 (1)
    net[m,t] + up[m,t] <= export_limit[m,t],  net[m,t] - down[m,t] >= -import_limit[m,t]   (2)

for each site and for the fleet; up, down: all reserve held behind it. Today's limits stand in place of the fleet's.
Where both limits are 0 it is islanded: its reserve serves its own load, and (2) does not bind.
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from math import inf

from schemas.job import TodaysLimits
from workers.planning.audit.case import Case
from workers.planning.audit.clock import whole_series
from workers.planning.audit.ledger import at, figure, pointer
from workers.planning.audit.meters import Meter
from workers.planning.audit.reserve import Held, power_held
from workers.planning.audit.reserve_market import Offer, down_offers, total_mw, up_offers


@dataclass(frozen=True)
class Limit:
    """The most that may flow one way, MW in each interval or in all, and where the request says so."""

    verb: str
    mw: float | Sequence[float]
    where: str


@dataclass(frozen=True)
class Connection:
    """A site's connection, or with `site` None that of the whole fleet: its limits, where it has any."""

    site: str | None
    export: Limit | None
    import_: Limit | None

    def is_islanded(self, count: int) -> list[bool]:
        """Tell for each interval whether nothing may flow either way."""
        if self.export is None or self.import_ is None:
            return [False] * count
        both = zip(_each(self.export.mw, count), _each(self.import_.mw, count), strict=True)
        return [out <= 0 and into <= 0 for out, into in both]


def check_connections(case: Case, meters: Sequence[Meter], fleet_mw: Sequence[float], held: Mapping[str, Held]) -> None:
    """Check export and import of each site and of the fleet, and the reserve held behind them."""
    behind: dict[str, list[Held]] = {}
    for asset in case.fleet.assets:
        if asset.site is not None and held[asset.id]:
            behind.setdefault(asset.site, []).append(held[asset.id])
    for place, meter in enumerate(meters):
        if meter.site is not None:
            standing = (meter.site.export_limit_mw, meter.site.import_limit_mw)
            connection = _read(case, meter.id, ("fleet", "sites", place), standing)
            _check(case, connection, meter.net_mw, behind.get(meter.id, ()))
    connection = _read(case, None, ("fleet",), (case.fleet.export_limit_mw, case.fleet.import_limit_mw))
    _check(case, connection, fleet_mw, [reserve for reserve in held.values() if reserve])


def _read(
    case: Case, site: str | None, place: tuple[str | int, ...], standing: tuple[float | None, float | None]
) -> Connection:
    name = "fleet" if site is None else site
    today = case.job.limits.get(name, TodaysLimits())

    def limit(verb: str, mw: float | None, mw_today: float | list[float] | None) -> Limit | None:
        member = f"{verb}_limit_mw"
        if mw_today is not None:
            series = whole_series(mw_today, case.clock.count, f"{member} of {name}")
            return Limit(verb, series, pointer("limits", name, member))
        return None if mw is None else Limit(verb, mw, pointer(*place, member))

    export = limit("export", standing[0], today.export_limit_mw)
    return Connection(site, export, limit("import", standing[1], today.import_limit_mw))


def _check(case: Case, connection: Connection, net: Sequence[float], held: Iterable[Held]) -> None:
    if connection.export is not None:
        flow = partial(_tell_flow, case, connection, connection.export, net)
        case.ledger.at_most(net, connection.export.mw, flow)
    imported = [-mw for mw in net]
    if connection.import_ is not None:
        flow = partial(_tell_flow, case, connection, connection.import_, imported)
        case.ledger.at_most(imported, connection.import_.mw, flow)
    if held:
        islanded = connection.is_islanded(case.clock.count)
        up, down = _all_held(up_offers(case.offers), held), _all_held(down_offers(case.offers), held)
        _check_called(case, connection, connection.export, net, up, islanded)
        _check_called(case, connection, connection.import_, imported, down, islanded)


def _all_held(offers: Sequence[Offer], held: Iterable[Held]) -> list[float] | None:
    rows = [power_held(offers, reserve) for reserve in held]
    return total_mw([row for row in rows if row is not None])


def _check_called(
    case: Case,
    connection: Connection,
    limit: Limit | None,
    flow: Sequence[float],
    reserve: Sequence[float] | None,
    islanded: Sequence[bool],
) -> None:
    if limit is None or reserve is None:
        return
    limits = _each(limit.mw, case.clock.count)
    asked = [inf if alone or mw <= 0 else most for alone, mw, most in zip(islanded, reserve, limits, strict=True)]
    called = [mw + more for mw, more in zip(flow, reserve, strict=True)]
    case.ledger.at_most(called, asked, partial(_tell_called, case, connection, limit, flow, reserve))


def _each(mw: float | Sequence[float], count: int) -> Sequence[float]:
    return [mw] * count if isinstance(mw, int | float) else mw


def _tell_flow(case: Case, connection: Connection, limit: Limit, flow: Sequence[float], t: int, excess: float) -> None:
    running = f"{connection.site or 'the fleet'} {limit.verb}s {figure(flow[t])} MW from {at(case.clock.starts[t])}"
    text = f"{running}, {figure(excess)} MW above its limit of {figure(flow[t] - excess)} MW"
    rule = f"{limit.verb}_limit"
    case.ledger.report(rule, limit.where, excess, "MW", text, site=connection.site, interval=t)


def _tell_called(
    case: Case,
    connection: Connection,
    limit: Limit,
    flow: Sequence[float],
    reserve: Sequence[float],
    t: int,
    excess: float,
) -> None:
    running = f"{connection.site or 'the fleet'} {limit.verb}s {figure(flow[t])} MW from {at(case.clock.starts[t])}"
    holding = f"{running} and holds {figure(reserve[t])} MW of reserve that way"
    text = f"{holding}: called, that is {figure(excess)} MW above its limit"
    rule = f"reserve_{limit.verb}"
    case.ledger.report(rule, limit.where, excess, "MW", text, site=connection.site, interval=t)
