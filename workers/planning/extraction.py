"""From a solver's numbers to set points: noise dropped, limits met to the digit.

Stored energy and money are not taken over: the audit recomputes them from the set points.
"""

import numpy as np

from workers.planning.store import Floats, Store

NOISE_MW = 1e-8
"""Below this a power is numerical dust; dropping it moves stored energy by far less than the audit tolerates."""

DIGITS = 9


def set_points(store: Store, power_mw: Floats) -> list[float]:
    """Clean one store's net powers, MW, positive into the grid."""
    clean = np.clip(power_mw, -store.charge_limit_mw, store.discharge_limit_mw)
    clean = np.where(np.abs(clean) < NOISE_MW, 0.0, np.round(clean, DIGITS))
    return [float(power) for power in clean + 0.0]
