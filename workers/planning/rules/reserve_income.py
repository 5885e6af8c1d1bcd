"""Reserve held is paid, committed or not.

    margin += sum of h * r[p,t] * held[a,p,t]                                          (1)

r  price per MW and hour; held  constant within each block, by having one column for it
"""

from workers.planning.model import Model
from workers.planning.reserve import Product
from workers.planning.rules.columns import UnitColumns


def add(model: Model, columns: UnitColumns, products: tuple[Product, ...], hours: float) -> None:
    """Add what one unit earns by holding reserve."""
    for number, held in columns.reserve.items():
        model.earn(held, hours * products[number].price_per_mw_per_hour)
