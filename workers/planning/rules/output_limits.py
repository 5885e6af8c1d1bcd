"""While on, a generator's output lies between its minimum and what is available, with the reserve it holds.

    P[t] + up[t] <= P_max[t] * u[t]                                                    (1)
    P[t] - down[t] >= P_min * u[t]                                                     (2)

P  output, MW; up, down  reserve held, summed over products (a symmetric one in both), MW
"""

from workers.planning.model import INFINITE, Model
from workers.planning.reserve import Product
from workers.planning.rules.columns import GeneratorColumns, Net, Reserve


def add(model: Model, columns: GeneratorColumns, products: tuple[Product, ...]) -> None:
    """Add (1) and (2) for one generator."""
    generator, output, is_on = columns.unit, columns.output, columns.is_on
    up, down = reserve_terms(columns.reserve, products, up=True), reserve_terms(columns.reserve, products, up=False)
    model.rows(-INFINITE, 0.0, (output, 1.0), (is_on, -generator.most_out_mw), *up)
    model.rows(0.0, INFINITE, (output, 1.0), (is_on, -generator.min_output_mw), *((held, -1.0) for held, _ in down))


def reserve_terms(reserve: Reserve, products: tuple[Product, ...], *, up: bool) -> Net:
    """Give the terms of the up- or down-reserve that a unit holds."""
    return [(held, 1.0) for number, held in reserve.items() if (products[number].up if up else products[number].down)]
