"""Check that a site, or the fleet, runs in whole lots.

net[m,t] = k * lot with k a whole number, positive, negative or 0
"""

from collections.abc import Sequence

from workers.planning.audit.case import Case
from workers.planning.audit.ledger import TOLERANCE, at, figure, pointer
from workers.planning.audit.meters import Meter


def check_lots(case: Case, meters: Sequence[Meter], fleet_mw: Sequence[float]) -> None:
    """Check the net power of each site that has a lot, and of the fleet if it has one."""
    for place, meter in enumerate(meters):
        if meter.site is not None and meter.site.lot_mw is not None:
            _check(case, meter.id, pointer("fleet", "sites", place, "lot_mw"), meter.site.lot_mw, meter.net_mw)
    if case.fleet.lot_mw is not None:
        _check(case, None, "/fleet/lot_mw", case.fleet.lot_mw, fleet_mw)


def _check(case: Case, site: str | None, where: str, lot: float, net: Sequence[float]) -> None:
    case.ledger.checks += len(net)
    if lot <= TOLERANCE:
        return  # every power is a whole number of such lots, within tolerance
    for t, mw in enumerate(net):
        gap = abs(mw - round(mw / lot) * lot)
        if gap <= TOLERANCE * max(1.0, abs(mw)):
            case.ledger.let_pass(gap)
            continue
        text = f"{site or 'the fleet'} reads {figure(mw)} MW from {at(case.clock.starts[t])}"
        text = f"{text}, {figure(gap)} MW off a whole number of lots of {figure(lot)} MW"
        case.ledger.report("lot", where, gap, "MW", text, site=site, interval=t)
