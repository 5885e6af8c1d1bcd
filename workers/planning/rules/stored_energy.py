"""Energy in store follows power, and stays within its limits.

    s[a,t] = s[a,t-1] * (1 - f[a])^h + h * (eta_c[a]*c[a,t] - d[a,t]/eta_d[a])         (1)
    s_min[a,t] <= s[a,t] <= s_max[a,t]                                                 (2)

s    energy in store at the end of interval t, MWh; s[a,-1] is the initial energy
c,d  charging and discharging power at the terminals, MW, both >= 0
h    interval length, hours; f  fraction lost per hour

(2) are the bounds of the columns; where a diagnosis leaves the initial energy open, that is a column too. Replayed by
the audit; the two must not share code.
"""

from workers.planning.model import Model
from workers.planning.rules.columns import StoreColumns


def add(model: Model, columns: StoreColumns, hours: float) -> None:
    """Add the energy balance (1) of one store."""
    store, stored = columns.unit, columns.stored
    into, out_of = -hours * store.charge_efficiency, hours / store.discharge_efficiency
    first = [(stored[:1], 1.0), (columns.charge[:1], into), (columns.discharge[:1], out_of)]
    start = store.initial_mwh * store.kept
    if columns.opening is not None:
        start = 0.0
        first.append((columns.opening, -store.kept))
    model.rows(start, start, *first)
    if len(stored) > 1:
        model.rows(
            0.0,
            0.0,
            (stored[1:], 1.0),
            (stored[:-1], -store.kept),
            (columns.charge[1:], into),
            (columns.discharge[1:], out_of),
        )
