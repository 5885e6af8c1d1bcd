"""Write down what meters read and pay: limits, lots, settlement against positions, fees, the peak import charge.

net[m,t] = sum of (power - standby load) of the assets on meter m
sales - purchases = sum over t of h * (sell * max(net - position, 0) - buy * max(position - net, 0))
"""

from __future__ import annotations

from math import ceil, floor
from typing import Any

from tests.oracles.formulation_clock import Clock, Job, given, series
from tests.oracles.formulation_program import Affine, Program, total
from tests.oracles.formulation_storage import Power

Powers = dict[str, Power]


def metered(powers: Powers, asset_ids: list[str], clock: Clock) -> list[Affine]:
    """Return the net sum of some assets as a meter would read it, with their standby loads, MW."""
    return [
        total(powers[asset_id].net[t].plus(-powers[asset_id].standby_load_mw) for asset_id in asset_ids)
        for t in range(len(clock))
    ]


def site_assets(job: Job, site_id: str) -> list[str]:
    """Return the ids of the assets on a site."""
    return [asset["id"] for asset in job["fleet"]["assets"] if given(asset, "site") == site_id]


def add_meters(program: Program, job: Job, powers: Powers, clock: Clock) -> None:
    """Add limits of sites and fleet, settlement, fees and peak charges."""
    fleet, nets = job["fleet"], {}
    for site in given(fleet, "sites", []):
        net = metered(powers, site_assets(job, site["id"]), clock)
        nets[site["id"]] = net
        _limits(program, job, site, [powers[a] for a in site_assets(job, site["id"])], net)
        _lots(program, site, net)
        _fees(program, site, clock, net)
        _peak(program, job, site, net)
    for asset in fleet["assets"]:
        if given(asset, "site") is None:
            nets[asset["id"]] = metered(powers, [asset["id"]], clock)
    everything = metered(powers, list(powers), clock)
    _limits(program, job, fleet, list(powers.values()), everything)
    _lots(program, fleet, everything)
    if given(job["window"], "settled_at", "site") == "fleet":
        nets = {"fleet": everything}
    for meter, net in nets.items():
        _settle(program, job, clock, net, given(given(job, "positions", {}), meter, 0.0))


def _limits(program: Program, job: Job, document: dict[str, Any], members: list[Power], net: list[Affine]) -> None:
    """Hold a site or the fleet (which has no id) within its limits, today's in place of the fleet's, with reserve.

    Where both limits are 0 it is islanded: its reserve serves its own load and is not counted.
    """
    today = given(given(job, "limits", {}), given(document, "id", "fleet"))
    limits = {}
    for key in ("export_limit_mw", "import_limit_mw"):
        limit = given(today, key, given(document, key))
        limits[key] = None if limit is None else series(limit, len(net))
    exported, imported = limits["export_limit_mw"], limits["import_limit_mw"]
    for t, expression in enumerate(net):
        up = total(power.reserve.power("up", t) for power in members)
        down = total(power.reserve.power("down", t) for power in members)
        if exported is not None and imported is not None and exported[t] == 0 and imported[t] == 0:
            up = down = Affine({})
        if exported is not None:
            program.at_most(expression + up, exported[t])
        if imported is not None:
            program.at_least(expression - down, -imported[t])


def _lots(program: Program, document: dict[str, Any], net: list[Affine]) -> None:
    """Make the net power of a site or the fleet a whole number of lots in every interval."""
    lot = given(document, "lot_mw")
    if lot is None:
        return
    for expression in net:
        lots = program.integer(floor(program.smallest(expression) / lot), ceil(program.largest(expression) / lot))
        program.equal(expression - lots * lot, 0.0)


def _settle(program: Program, job: Job, clock: Clock, net: list[Affine], position: Any) -> None:
    """Sell what is above the position and buy what is below it, each at its own price, never both in one interval."""
    window, count = job["window"], len(clock)
    single = given(window, "price_per_mwh")
    buy = series(window["buy_price_per_mwh"] if single is None else single, count)
    sell = series(window["sell_price_per_mwh"] if single is None else single, count)
    for t, sold in enumerate(series(position, count)):
        above = net[t].plus(-sold)
        if buy[t] == sell[t]:
            program.earn(above * (sell[t] * clock.hours))
            continue
        most_sold, most_bought = max(0.0, program.largest(above)), max(0.0, -program.smallest(above))
        sales, purchases = program.column(0.0, most_sold), program.column(0.0, most_bought)
        program.equal(above - sales + purchases, 0.0)
        if buy[t] < sell[t]:
            selling = program.binary()
            program.at_most(sales - selling * most_sold, 0.0)
            program.at_most(purchases + selling * most_bought, most_bought)
        program.earn((sales * sell[t] - purchases * buy[t]) * clock.hours)


def _fees(program: Program, site: dict[str, Any], clock: Clock, net: list[Affine]) -> None:
    """Charge metered export and import; fees are never negative, so no binary is needed."""
    export_fee, import_fee = given(site, "export_fee_per_mwh", 0.0), given(site, "import_fee_per_mwh", 0.0)
    if export_fee == 0 and import_fee == 0:
        return
    for expression in net:
        exported = program.column(0.0, max(0.0, program.largest(expression)))
        imported = program.column(0.0, max(0.0, -program.smallest(expression)))
        program.equal(expression - exported + imported, 0.0)
        program.earn((exported * export_fee + imported * import_fee) * -clock.hours)


def _peak(program: Program, job: Job, site: dict[str, Any], net: list[Affine]) -> None:
    """Charge the highest import above the peak so far."""
    charge = given(site, "peak_import_charge_per_mw", 0.0)
    if charge == 0:
        return
    before = given(given(given(given(job, "counted_before"), "sites"), site["id"]), "peak_import_mw", 0.0)
    raised = program.column(0.0, max(0.0, *(-program.smallest(expression) for expression in net)))
    for expression in net:
        program.at_least(raised + expression, -before)
    program.earn(raised * -charge)
