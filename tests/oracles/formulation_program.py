"""Collect columns and rows of a mixed-integer linear program and have scipy solve it.

    maximise  value(x)   subject to   lower <= A x <= upper,   some x whole numbers

Everything the oracle writes down is an `Affine` expression over columns; its range follows from the columns' bounds,
so every "large enough" constant is computed and none is guessed. Squares (`spend_square`) are bounded from below by
tangents, which makes the bound too good rather than too bad; tangents are added where the answer lies until the exact
value of the answer and the bound meet within the gap.
"""

from __future__ import annotations

import time
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy import optimize, sparse

INFINITE = float("inf")
ROUNDS = 25
# Tangents closer to each other than the solver's own tolerance say nothing new: squares are settled to this much money.
SETTLED = 5e-7


@dataclass(frozen=True)
class Affine:
    """Hold `constant + sum(coefficient * column)`."""

    terms: dict[int, float]
    constant: float = 0.0

    def __add__(self, other: Affine) -> Affine:
        terms = dict(self.terms)
        for column, coefficient in other.terms.items():
            terms[column] = terms.get(column, 0.0) + coefficient
        return Affine(terms, self.constant + other.constant)

    def __sub__(self, other: Affine) -> Affine:
        return self + other * -1.0

    def __mul__(self, factor: float) -> Affine:
        return Affine({c: factor * a for c, a in self.terms.items()}, factor * self.constant)

    def plus(self, amount: float) -> Affine:
        """Return the expression with `amount` added to its constant."""
        return Affine(self.terms, self.constant + amount)

    def at(self, columns: Any) -> float:
        """Return the value of the expression at a point."""
        return self.constant + sum(a * float(columns[c]) for c, a in self.terms.items())


def total(parts: Iterable[Affine]) -> Affine:
    """Add up expressions; none at all is 0."""
    whole = Affine({})
    for part in parts:
        whole = whole + part
    return whole


@dataclass(frozen=True)
class Solution:
    """Tell how the solver ended. `status` 0: optimal, 1: a limit was reached, 2: infeasible (scipy's numbers).

    `bound` is an upper bound of the value to maximise; `columns` is None where no point was found.
    """

    status: int
    value: float | None
    bound: float | None
    columns: Any


@dataclass(frozen=True)
class Square:
    """Hold a cost `factor * power**2`, 0 where `on` is 0; `column` is its stand-in, below it as tangents are."""

    column: int
    power: Affine
    on: Affine
    factor: float

    def missing(self, columns: Any) -> float:
        """Return by how much the stand-in falls short of the true cost at a point, never below 0."""
        return max(0.0, self.factor * self.power.at(columns) ** 2 - float(columns[self.column]))


class Program:
    """Grow a program column by column and row by row."""

    def __init__(self) -> None:
        # One column that is 0, as scipy takes no program without any: a fleet of loads leaves nothing to decide.
        self.lower: list[float] = [0.0]
        self.upper: list[float] = [0.0]
        self.whole: list[int] = [0]
        self.rows: list[tuple[dict[int, float], float, float]] = []
        self.value = Affine({})
        self.squares: list[Square] = []

    def column(self, lower: float, upper: float) -> Affine:
        """Add a continuous column and return it as an expression."""
        self.lower.append(lower)
        self.upper.append(upper)
        self.whole.append(0)
        return Affine({len(self.lower) - 1: 1.0})

    def binary(self, possible: bool = True) -> Affine:
        """Add a column that is 0 or 1; always 0 where it is not `possible`."""
        added = self.column(0.0, 1.0 if possible else 0.0)
        self.whole[-1] = 1
        return added

    def integer(self, lower: int, upper: int) -> Affine:
        """Add a column that is a whole number."""
        added = self.column(float(lower), float(upper))
        self.whole[-1] = 1
        return added

    def at_least(self, expression: Affine, amount: float) -> None:
        """Ask `expression >= amount`."""
        self.rows.append((expression.terms, amount - expression.constant, INFINITE))

    def at_most(self, expression: Affine, amount: float) -> None:
        """Ask `expression <= amount`."""
        self.rows.append((expression.terms, -INFINITE, amount - expression.constant))

    def equal(self, expression: Affine, amount: float) -> None:
        """Ask `expression = amount`."""
        self.rows.append((expression.terms, amount - expression.constant, amount - expression.constant))

    def earn(self, expression: Affine) -> None:
        """Add `expression` to the value to maximise."""
        self.value = self.value + expression

    def spend_square(self, power: Affine, on: Affine, factor: float) -> None:
        """Subtract `factor * power**2` from the value; `power` must be at least 0, and 0 where the binary `on` is 0."""
        if factor == 0:
            return
        most = self.largest(power)
        stand_in = self.column(0.0, factor * most**2)
        self.earn(stand_in * -1.0)
        square = Square(len(self.lower) - 1, power, on, factor)
        self.squares.append(square)
        for share in (0.25, 0.5, 0.75, 1.0):
            self._tangent(square, share * most)

    def _tangent(self, square: Square, point: float) -> None:
        """Hold the stand-in above the tangent of its square at `point`, through the origin where it is off."""
        line = (square.power * (2.0 * point) - square.on * point**2) * square.factor
        self.at_least(Affine({square.column: 1.0}) - line, 0.0)

    def smallest(self, expression: Affine) -> float:
        """Return a lower bound of `expression` that follows from the columns' bounds."""
        return expression.constant + sum(
            a * (self.lower[c] if a > 0 else self.upper[c]) for c, a in expression.terms.items() if a != 0
        )

    def largest(self, expression: Affine) -> float:
        """Return an upper bound of `expression` that follows from the columns' bounds."""
        return -self.smallest(expression * -1.0)

    def solve(self, gap: float, time_limit: float) -> Solution:
        """Solve to the relative `gap`; with squares, as often as tangents are missing where the answer lies."""
        deadline = time.monotonic() + time_limit
        best = self._solve_once(gap, time_limit)
        for _ in range(ROUNDS):
            if best.value is None or best.bound is None or best.status != 0:
                return best
            if not self.squares or best.bound - best.value <= max(SETTLED, 2.0 * gap * max(1.0, abs(best.value))):
                return best
            found = self._solve_once(gap, max(0.1, deadline - time.monotonic()))
            if found.value is None or found.bound is None:
                break
            better = found if found.value > best.value else best
            bound = max(min(best.bound, found.bound), found.value, best.value)
            best = Solution(found.status, better.value, bound, better.columns)
        return Solution(1, best.value, best.bound, best.columns)

    def can_be_met(self, time_limit: float) -> bool:
        """Tell whether any point meets all rows; forgets the value, which has no say in that.

        Raises RuntimeError where the solver neither finds a point nor proves that there is none.
        """
        self.value = Affine({})
        found = self._run(np.array(self.lower), np.array(self.upper), np.array(self.whole), 0.0, time_limit)
        if found.status not in (0, 2):
            raise RuntimeError("the solver ended with status", found.status)
        return bool(found.status == 0)

    def _solve_once(self, gap: float, time_limit: float) -> Solution:
        """Solve with the tangents at hand; then settle the continuous columns for the whole ones found."""
        found = self._run(np.array(self.lower), np.array(self.upper), np.array(self.whole), gap, time_limit)
        if found.x is None:
            return Solution(int(found.status), None, None, None)
        columns, value = found.x, -found.fun + self.value.constant
        bound = value if found.mip_dual_bound is None else -found.mip_dual_bound + self.value.constant
        # A whole column may be off by 1e-6 in the solver's answer; with all of them rounded and fixed it is not.
        whole = np.array(self.whole) == 1
        fixed = np.round(np.asarray(columns))
        lower = np.where(whole, fixed, np.array(self.lower))
        upper = np.where(whole, fixed, np.array(self.upper))
        value -= self._missing(columns)
        for n in range(ROUNDS):
            settled = self._run(lower, upper, np.zeros(len(lower)), gap, time_limit)
            if settled.status != 0:
                break
            missing = self._missing(settled.x)
            exact = -settled.fun + self.value.constant - missing
            if n == 0 or exact > value:
                columns, value = settled.x, exact
            if missing <= max(0.1 * SETTLED, 0.1 * gap * max(1.0, abs(value))):
                break
            self._refine(settled.x)
        return Solution(int(found.status), float(value), float(max(bound, value)), columns)

    def _missing(self, columns: Any) -> float:
        return sum(square.missing(columns) for square in self.squares)

    def _refine(self, columns: Any) -> None:
        """Add the tangents that are missing at a point."""
        for square in self.squares:
            if square.missing(columns) > 0.1 * SETTLED / len(self.squares):
                self._tangent(square, square.power.at(columns))

    def _run(self, lower: Any, upper: Any, whole: Any, gap: float, time_limit: float) -> Any:
        cost = np.zeros(len(self.lower))
        for column, coefficient in self.value.terms.items():
            cost[column] = -coefficient
        constraints = []
        if self.rows:
            entries = [(r, c, a) for r, (terms, _, _) in enumerate(self.rows) for c, a in terms.items()]
            shape = (len(self.rows), len(self.lower))
            matrix = sparse.csr_matrix(
                ([a for _, _, a in entries], ([r for r, _, _ in entries], [c for _, c, _ in entries])), shape=shape
            )
            low, high = [r[1] for r in self.rows], [r[2] for r in self.rows]
            constraints.append(optimize.LinearConstraint(matrix, low, high))
        return optimize.milp(
            cost,
            integrality=whole,
            bounds=optimize.Bounds(lower, upper),
            constraints=constraints,
            options={"mip_rel_gap": gap, "time_limit": time_limit},
        )
