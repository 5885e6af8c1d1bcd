"""Energy is sold and bought against what was sold already; the connection's fees and peak charge come on top.

    margin += sum of h * sell[t] * max(net[t] - p[t], 0) - h * buy[t] * max(p[t] - net[t], 0)         (1)
    margin -= sum of h * (fx * max(net[t], 0) + fi * max(-net[t], 0))                                 (2)
    margin -= k * peak,  peak >= -net[t] - peak so far,  peak >= 0                                    (3)

net  power at the settling meter, MW; p  position; fx,fi  fees per MWh exported, imported; k  charge per MW

With one price (1) is linear in the powers. Otherwise the two parts are columns around the position, with a binary
where selling earns more than buying costs.
"""

import numpy as np

from workers.planning.instance import Instance, Meter
from workers.planning.model import INFINITE, Model
from workers.planning.rules import metered_flows
from workers.planning.rules.columns import FleetColumns


def add(model: Model, columns: FleetColumns) -> None:
    """Add all money that meters earn and pay."""
    instance = columns.instance
    if instance.settles_fleet:
        _settle(model, columns, instance.fleet, with_fees=False)
    for meter in instance.meters:
        fees_due = bool(meter.export_fee_per_mwh or meter.import_fee_per_mwh)
        at_zero = not meter.position_mw.any()
        together = fees_due and at_zero and not instance.settles_fleet
        if not instance.settles_fleet:
            _settle(model, columns, meter, with_fees=together)
        if fees_due and not together:
            _fees(model, columns, meter)
        if meter.peak_import_charge_per_mw:
            _peak(model, columns, meter)


def _settle(model: Model, columns: FleetColumns, meter: Meter, *, with_fees: bool) -> None:
    """Add (1) for one settling meter, and (2) with it where both turn at the same power."""
    instance = columns.instance
    if instance.has_one_price and not with_fees:
        _one_price(model, columns, meter, instance)
        return
    sell = instance.sell - (meter.export_fee_per_mwh if with_fees else 0.0)
    buy = instance.buy + (meter.import_fee_per_mwh if with_fees else 0.0)
    flows = metered_flows.add(model, columns, meter, meter.position_mw, sell > buy)
    model.earn(flows.above, instance.hours * sell)
    model.earn(flows.below, -instance.hours * buy)


def _one_price(model: Model, columns: FleetColumns, meter: Meter, instance: Instance) -> None:
    money = instance.hours * instance.sell
    for part, factor in columns.net(meter.units):
        model.earn(part, money * factor)
    model.constant -= float(money @ (meter.load_mw + meter.position_mw))


def _fees(model: Model, columns: FleetColumns, meter: Meter) -> None:
    nowhere = np.zeros(columns.instance.intervals, dtype=bool)
    flows = metered_flows.add(model, columns, meter, np.zeros(columns.instance.intervals), nowhere)
    model.earn(flows.above, -columns.instance.hours * meter.export_fee_per_mwh)
    model.earn(flows.below, -columns.instance.hours * meter.import_fee_per_mwh)


def _peak(model: Model, columns: FleetColumns, meter: Meter) -> None:
    drawn = meter.load_mw + sum(columns.instance.units[number].most_in_mw for number in meter.units)
    peak = model.columns(1, 0.0, max(0.0, float(np.max(drawn)) - meter.peak_so_far_mw))
    model.earn(peak, -meter.peak_import_charge_per_mw)
    everywhere = np.repeat(peak, columns.instance.intervals)
    model.rows(meter.load_mw - meter.peak_so_far_mw, INFINITE, *columns.net(meter.units), (everywhere, 1.0))
