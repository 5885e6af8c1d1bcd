"""How much power could flow at all: where levers that raise something may end."""

import numpy as np

from workers.planning.instance import Instance


def most_power(instance: Instance) -> float:
    """Give more power than could flow anywhere, MW."""
    flow = sum((unit.most_out_mw + unit.most_in_mw for unit in instance.units), start=np.zeros(instance.intervals))
    loads = sum((np.abs(meter.load_mw) for meter in instance.meters), start=np.zeros(instance.intervals))
    return float(np.max(flow + loads))
