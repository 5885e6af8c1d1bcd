"""From a solver's numbers to set points: noise dropped, limits met to the digit.

Stored energy and money are not taken over: the audit recomputes them from the set points.
"""

import numpy as np

from workers.planning.assembly import UnitPlan
from workers.planning.audit import Decision
from workers.planning.instance import Instance
from workers.planning.units import Floats, Unit

NOISE_MW = 1e-8
"""Below this a power is numerical dust; dropping it moves stored energy by far less than the audit tolerates."""

DIGITS = 9


def decision_of(instance: Instance, unit: Unit, plan: UnitPlan) -> Decision:
    """Clean what a unit was planned to do: set points, whether it is on, reserve held."""
    power = np.clip(plan.power_mw, -unit.most_in_mw, unit.most_out_mw)
    if plan.is_on is not None:
        power = np.where(plan.is_on, power, 0.0)
    return Decision(
        power_mw=_clean(power),
        on=None if plan.is_on is None else plan.is_on.tolist(),
        reserve_mw={
            instance.products[product].id: _clean(np.maximum(held, 0.0)) for product, held in plan.reserve_mw.items()
        },
    )


def _clean(power_mw: Floats) -> list[float]:
    clean = np.where(np.abs(power_mw) < NOISE_MW, 0.0, np.round(power_mw, DIGITS))
    return [float(power) for power in clean + 0.0]
