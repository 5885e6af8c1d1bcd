"""CP-SAT on whole steps: a model that relaxes the one given, so that its bound and its proof of infeasibility hold.

A column x in [l, u] becomes x = step * X with X whole. Every feasible x lies within half a step of such a point, so
each row `lower <= sum a*x <= upper` is loosened by the sum of |a| * step / 2, and by what rounding its coefficients to
whole numbers may move it. What comes back is a choice for the integer columns and a bound of the model given; the
powers are only near: settle them by an LP with the choices fixed.
"""

from dataclasses import dataclass
from time import perf_counter

import numpy as np
from ortools.sat.python import cp_model

from workers.planning.limits import Watch
from workers.planning.solvers.ending import Ending, SolverError, Stopped
from workers.planning.solvers.highs import Effort, Matrix
from workers.planning.units import Floats

FINEST_STEP, COARSEST_STEP = 1e-6, 1e-3
"""MW, MWh or whatever the column counts: 1 W to 1 kW."""

LARGEST = 2**40
"""Most steps in a column's range."""

COEFFICIENT = 2.0**24
"""Whole coefficients of a row are at most this: finer ones gain nothing over the steps."""

MEANING: dict[str, Stopped | None] = {
    "OPTIMAL": Stopped.WITHIN_GAP,
    "FEASIBLE": Stopped.OUT_OF_TIME,
    "INFEASIBLE": Stopped.INFEASIBLE,
    "UNKNOWN": Stopped.OUT_OF_TIME,
    "MODEL_INVALID": None,
}
"""Every status of CP-SAT by its name; None is a fault here."""


@dataclass(frozen=True)
class Steps:
    """Size of a step per column; whole columns have steps of 1, and lose nothing to rounding."""

    size: Floats
    lost: Floats


def solve(matrix: Matrix, effort: Effort, watch: Watch) -> Ending:
    """Maximise over whole steps; `values` are near a feasible point, not feasible, and `margin` is theirs.

    Raises ValueError for a column without finite bounds, SolverError for a word without a meaning.
    """
    if (matrix.lower > matrix.upper).any():
        return Ending(Stopped.INFEASIBLE, None, None, -np.inf, 0.0)
    if not (np.isfinite(matrix.lower).all() and np.isfinite(matrix.upper).all()):
        raise ValueError("CP-SAT needs finite bounds for every column")
    began = perf_counter()
    steps = _steps(matrix, effort)
    model, variables = cp_model.CpModel(), []
    for low, high in zip(np.floor(matrix.lower / steps.size), np.ceil(matrix.upper / steps.size), strict=True):
        variables.append(model.new_int_var(int(low), int(high), ""))
    for k in range(len(matrix.row_lower)):
        _add_row(model, variables, matrix, steps, k)
    whole, scale, slack = _whole(matrix.money, steps, matrix)
    model.maximize(cp_model.LinearExpr.weighted_sum(variables, whole.tolist()))
    solver = cp_model.CpSolver()
    solver.parameters.num_workers = 1
    solver.parameters.random_seed = effort.seed
    solver.parameters.max_time_in_seconds = max(effort.seconds, 0.0)
    solver.parameters.relative_gap_limit = effort.relative_gap / 2
    with watch.solving(solver.stop_search):
        status = solver.status_name(solver.solve(model))
    stopped = MEANING.get(status)
    if stopped is None:
        raise SolverError("CP-SAT", status)
    if stopped is Stopped.OUT_OF_TIME and watch.is_stop_asked():
        stopped = Stopped.INTERRUPTED
    seconds = perf_counter() - began
    if stopped is Stopped.INFEASIBLE:
        return Ending(stopped, None, None, -np.inf, seconds)
    bound = solver.best_objective_bound / scale + slack + matrix.constant if status != "UNKNOWN" else np.inf
    if status == "UNKNOWN":
        return Ending(stopped, None, None, bound, seconds)
    values = steps.size * np.array([solver.value(variable) for variable in variables], dtype=float)
    values = np.clip(values, matrix.lower, matrix.upper)
    return Ending(stopped, values, float(matrix.money @ values) + matrix.constant, bound, seconds)


def _steps(matrix: Matrix, effort: Effort) -> Steps:
    """Choose steps so fine that rounding costs a small share of the gap asked for."""
    allowed = max(effort.absolute_gap, effort.relative_gap) / 8
    weight = float(np.abs(matrix.money[~matrix.integer]).sum())
    step = float(np.clip(2 * allowed / weight if weight else COARSEST_STEP, FINEST_STEP, COARSEST_STEP))
    size = np.maximum(step, (matrix.upper - matrix.lower) / LARGEST)
    size = np.where(matrix.integer, 1.0, size)
    return Steps(size, np.where(matrix.integer, 0.0, size / 2))


def _whole(coefficients: Floats, steps: Steps, matrix: Matrix) -> tuple[np.ndarray, float, float]:
    """Round coefficients per step to whole numbers; give them, their scale, and the most that rounding can move."""
    per_step = coefficients * steps.size
    largest = float(np.abs(per_step).max(initial=0.0))
    scale = COEFFICIENT / largest if largest > 0 else 1.0
    whole = np.round(per_step * scale).astype(np.int64)
    reach = np.maximum(np.abs(matrix.lower), np.abs(matrix.upper)) / steps.size + 1.0
    moved = float(np.abs(whole / scale - per_step) @ reach)
    return whole, scale, moved + float(np.abs(coefficients) @ steps.lost)


def _add_row(model: cp_model.CpModel, variables: list[cp_model.IntVar], matrix: Matrix, steps: Steps, k: int) -> None:
    """Add a row, loosened so that every feasible point has a whole one nearby that keeps it."""
    place = slice(matrix.rows.indptr[k], matrix.rows.indptr[k + 1])
    columns, coefficients = matrix.rows.indices[place], matrix.rows.data[place]
    if len(columns) == 0:
        return
    per_step = coefficients * steps.size[columns]
    scale = COEFFICIENT / float(np.abs(per_step).max())
    whole = np.round(per_step * scale).astype(np.int64)
    reach = np.maximum(np.abs(matrix.lower[columns]), np.abs(matrix.upper[columns])) / steps.size[columns] + 1.0
    slack = float(np.abs(whole / scale - per_step) @ reach) + float(np.abs(coefficients) @ steps.lost[columns])
    low, high = matrix.row_lower[k], matrix.row_upper[k]
    most = int(np.abs(whole).astype(float) @ reach) + 1
    lower = -most if not np.isfinite(low) else max(-most, int(np.floor((low - slack) * scale)) - 1)
    upper = most if not np.isfinite(high) else min(most, int(np.ceil((high + slack) * scale)) + 1)
    expression = cp_model.LinearExpr.weighted_sum([variables[j] for j in columns], whole.tolist())
    model.add_linear_constraint(expression, lower, upper)
