"""Collect columns and rows of a mixed-integer linear program and have scipy solve it.

    maximise  value(x)   subject to   lower <= A x <= upper,   some x whole numbers

Everything the oracle writes down is an `Affine` expression over columns; its range follows from the columns' bounds,
so every "large enough" constant is computed and none is guessed.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy import optimize, sparse

INFINITE = float("inf")


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


class Program:
    """Grow a program column by column and row by row."""

    def __init__(self) -> None:
        self.lower: list[float] = []
        self.upper: list[float] = []
        self.whole: list[int] = []
        self.rows: list[tuple[dict[int, float], float, float]] = []
        self.value = Affine({})

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

    def smallest(self, expression: Affine) -> float:
        """Return a lower bound of `expression` that follows from the columns' bounds."""
        return expression.constant + sum(
            a * (self.lower[c] if a > 0 else self.upper[c]) for c, a in expression.terms.items() if a != 0
        )

    def largest(self, expression: Affine) -> float:
        """Return an upper bound of `expression` that follows from the columns' bounds."""
        return -self.smallest(expression * -1.0)

    def solve(self, gap: float, time_limit: float) -> Solution:
        """Solve to the relative `gap`, then settle the continuous columns exactly for the whole ones found."""
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
        settled = self._run(lower, upper, np.zeros(len(lower)), gap, time_limit)
        if settled.status == 0:
            columns, value = settled.x, -settled.fun + self.value.constant
        return Solution(int(found.status), float(value), max(float(bound), float(value)), columns)

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
