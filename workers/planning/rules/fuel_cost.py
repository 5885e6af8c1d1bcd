"""Running costs what the curve says; its square is bounded from below by tangents.

    margin -= sum of h * (c0 * u[t] + c1 * P[t] + c2 * x[t])                           (1)
    x[t] >= 2*p*P[t] - p^2 * u[t]  for each tangent point p                            (2)

c0, c1, c2  cost per hour, per MWh, per MW^2 and hour; x  stands for P^2

(2) holds for the true square since (P - p*u)^2 >= 0: the model's margin is never below the true one, and its bound is
one for the request. The factor u makes the tangents as tight as they can be (the perspective of the square).
"""

import numpy as np

from workers.planning.model import INFINITE, Columns, Model
from workers.planning.rules.columns import GeneratorColumns
from workers.planning.units import Floats

TANGENTS = 10
"""Tangent points at first, evenly over the range of output; more go in at outputs that are found."""


def add(model: Model, columns: GeneratorColumns, hours: float) -> None:
    """Add the running cost of one generator."""
    generator = columns.unit
    model.earn(columns.is_on, -hours * generator.constant_per_hour)
    model.earn(columns.output, -hours * generator.linear_per_mwh)
    if columns.squared is None:
        return
    model.earn(columns.squared, -hours * generator.quadratic_per_mw2h)
    for point in np.linspace(generator.min_output_mw, generator.rated_mw, TANGENTS):
        terms = tangent(columns, np.arange(len(columns.output)), np.full(len(columns.output), point))
        model.rows(0.0, INFINITE, *terms)


def tangent(columns: GeneratorColumns, where: Columns, points: Floats) -> list[tuple[Columns, Floats | float]]:
    """Give the terms of (2), moved to one side, in some intervals at given outputs, MW."""
    assert columns.squared is not None
    return [
        (columns.squared[where], 1.0),
        (columns.output[where], -2.0 * points),
        (columns.is_on[where], np.square(points)),
    ]


def too_low(columns: GeneratorColumns, values: Floats, hours: float) -> Floats:
    """Give by how much the model's fuel cost lies below the true one, money per interval."""
    if columns.squared is None:
        return np.zeros(len(columns.output))
    missing: Floats = np.square(values[columns.output]) - values[columns.squared]
    return hours * columns.unit.quadratic_per_mw2h * np.maximum(missing, 0.0)
