"""A linear model with integers, gathered rule by rule in arrays, and handed to Pyomo as one matrix.

Building Pyomo expressions row by row takes longer than HiGHS needs to solve a store's day, so rules write whole
families of rows at once and `as_pyomo` wraps them in a kernel block: its variables, one matrix constraint, one
linear objective. What money earns is maximised.
"""

from typing import Any

import numpy as np
import pyomo.kernel as pmo
from numpy.typing import ArrayLike, NDArray
from pyomo.core.expr.numeric_expr import LinearExpression
from scipy.sparse import csr_matrix

Columns = NDArray[np.int64]
Floats = NDArray[np.float64]
Term = tuple[Columns, float | Floats]

INFINITE = float("inf")


class Model:
    """Columns, rows and money; `maximise` is implied."""

    def __init__(self) -> None:
        self._lower: list[Floats] = []
        self._upper: list[Floats] = []
        self._integer: list[NDArray[np.bool_]] = []
        self._money: list[tuple[Columns, Floats]] = []
        self._row_lower: list[Floats] = []
        self._row_upper: list[Floats] = []
        self._entries: list[tuple[Columns, Columns, Floats]] = []
        self.column_count = 0
        self.row_count = 0
        self.constant = 0.0

    def columns(self, count: int, lower: ArrayLike, upper: ArrayLike, *, integer: bool = False) -> Columns:
        """Add `count` variables and return their numbers."""
        self._lower.append(np.broadcast_to(np.asarray(lower, dtype=float), count))
        self._upper.append(np.broadcast_to(np.asarray(upper, dtype=float), count))
        self._integer.append(np.full(count, integer))
        first = self.column_count
        self.column_count += count
        return np.arange(first, first + count)

    def binaries(self, allowed: NDArray[np.bool_]) -> Columns:
        """Add a yes-or-no variable for each entry, fixed to no where it is not allowed."""
        return self.columns(len(allowed), 0.0, allowed.astype(float), integer=True)

    def earn(self, columns: Columns, money: ArrayLike) -> None:
        """Add what one unit of each column earns, in the window's currency; costs are negative."""
        self._money.append((columns, np.broadcast_to(np.asarray(money, dtype=float), len(columns))))

    def rows(self, lower: ArrayLike, upper: ArrayLike, *terms: Term) -> None:
        """Add a family of rows `lower <= sum of coefficient * column <= upper`, one per entry of the terms' arrays.

        All terms' column arrays have the same length; coefficients and bounds are numbers or arrays of that length.
        """
        count = len(terms[0][0])
        numbers = np.arange(self.row_count, self.row_count + count)
        for columns, coefficients in terms:
            values = np.broadcast_to(np.asarray(coefficients, dtype=float), count)
            self._entries.append((numbers, columns, values))
        self._add_bounds(count, lower, upper)

    def row(self, lower: float, upper: float, *terms: Term) -> None:
        """Add a single row that sums over every entry of its terms."""
        for columns, coefficients in terms:
            values = np.broadcast_to(np.asarray(coefficients, dtype=float), len(columns))
            self._entries.append((np.full(len(columns), self.row_count), columns, values))
        self._add_bounds(1, lower, upper)

    def _add_bounds(self, count: int, lower: ArrayLike, upper: ArrayLike) -> None:
        self._row_lower.append(np.broadcast_to(np.asarray(lower, dtype=float), count))
        self._row_upper.append(np.broadcast_to(np.asarray(upper, dtype=float), count))
        self.row_count += count

    @property
    def lower(self) -> Floats:
        """Least value of each column."""
        return _joined(self._lower)

    @property
    def upper(self) -> Floats:
        """Largest value of each column."""
        return _joined(self._upper)

    @property
    def integer(self) -> NDArray[np.bool_]:
        """Columns that are whole numbers."""
        return np.concatenate(self._integer) if self._integer else np.zeros(0, dtype=bool)

    @property
    def row_lower(self) -> Floats:
        """Least value of each row."""
        return _joined(self._row_lower)

    @property
    def row_upper(self) -> Floats:
        """Largest value of each row."""
        return _joined(self._row_upper)

    @property
    def money(self) -> Floats:
        """What one unit of each column earns."""
        money = np.zeros(self.column_count)
        for columns, amounts in self._money:
            np.add.at(money, columns, amounts)
        return money

    def as_pyomo(self) -> Any:
        """Wrap the model in a Pyomo kernel block with `variables`, `rows` (if any) and `margin`."""
        lower, upper, integer, money = self.lower, self.upper, self.integer, self.money
        block = pmo.block()
        variables = [
            pmo.variable(lb=low, ub=high, domain_type=pmo.IntegerSet if whole else pmo.RealSet)
            for low, high, whole in zip(lower.tolist(), upper.tolist(), integer.tolist(), strict=True)
        ]
        block.variables = pmo.variable_tuple(variables)
        if self.row_count:
            block.rows = pmo.matrix_constraint(self.matrix(), lb=self.row_lower, ub=self.row_upper, x=block.variables)
        earning = np.flatnonzero(money)
        terms = pmo.expression(sum_of(money[earning].tolist(), [variables[k] for k in earning], self.constant))
        block.margin = pmo.objective(terms, sense=pmo.maximize)
        return block

    def matrix(self) -> csr_matrix:
        """Give the rows as one sparse matrix."""
        if not self._entries:
            return csr_matrix((self.row_count, self.column_count))
        numbers = np.concatenate([entry[0] for entry in self._entries])
        columns = np.concatenate([entry[1] for entry in self._entries])
        values = np.concatenate([entry[2] for entry in self._entries])
        matrix = csr_matrix((values, (numbers, columns)), shape=(self.row_count, self.column_count))
        matrix.eliminate_zeros()
        return matrix


def sum_of(coefficients: list[float], variables: list[Any], constant: float) -> Any:
    """Write a linear expression without walking through Python's operators term by term."""
    return LinearExpression(constant=constant, linear_coefs=coefficients, linear_vars=variables)


def _joined(parts: list[Floats]) -> Floats:
    return np.concatenate(parts) if parts else np.zeros(0)
