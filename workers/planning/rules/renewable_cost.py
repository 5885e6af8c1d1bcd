"""A renewable's output has its cost; what it can give are the bounds of its column.

margin -= sum of h * k * P[t],   0 <= P[t] <= forecast[t]  (= where it cannot be curtailed)       (1)
"""

from workers.planning.model import Model
from workers.planning.rules.columns import RenewableColumns


def add(model: Model, columns: RenewableColumns, hours: float) -> None:
    """Add the cost of one renewable."""
    if columns.unit.cost_per_mwh:
        model.earn(columns.output, -hours * columns.unit.cost_per_mwh)
