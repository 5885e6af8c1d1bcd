"""CP-SAT on whole steps: a model that relaxes the one given, so that its bound and its proof of infeasibility hold.

A column x in [l, u] becomes x = step * X with X whole. Every feasible x lies within half a step of such a point, so
each row `lower <= sum a*x <= upper` is loosened by the sum of |a| * step / 2, and by what rounding its coefficients to
whole numbers may move it. Its bound is one of the model given; its powers are only near, and make use of every
looseness. A *near* model loosens equations alone: its choice of the integer columns is likelier to have exact powers
(settle them by an LP with the choices fixed), its bound proves nothing.
"""

from dataclasses import dataclass, replace
from time import perf_counter

import numpy as np
from ortools.sat.python import cp_model

from workers.planning.limits import Watch
from workers.planning.solvers.ending import Ending, SolverError, Stopped
from workers.planning.solvers.highs import Effort, Matrix
from workers.planning.units import Floats

STEP = 1e-3
"""MW, MWh or whatever a column counts: 1 kW. Ten times finer, small fleets took ten times as long, or did not end."""

LARGEST = 2**40
"""Most steps in a column's range."""

COEFFICIENT = 2.0**24
"""Whole coefficients of a row are at most this: finer ones gain nothing over the steps."""

NEARLY = 1e-3
"""What rounding a bound may cost a row of a near model, in its whole units."""

EXACT_FACTORS = (1, 2, 3, 4, 5, 10, 20, 50, 100, 200, 500, 1000)

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


class BeyondWholeSteps(Exception):  # noqa: N818 - it says that another method is due, not that something went wrong
    """A model that cannot be put in whole steps."""


def solve(matrix: Matrix, effort: Effort, watch: Watch, *, near: bool = False, hint: Floats | None = None) -> Ending:
    """Maximise over whole steps; `values` are near a feasible point, not feasible, and `margin` is theirs.

    With `near`, equations alone are loosened: nothing is proven, neither by the bound (infinite) nor by failing. A
    `hint`, a value for each column, is where the search looks first; it need not be feasible.

    Raises BeyondWholeSteps where a column has no finite bound or sizes differ by more than whole numbers can hold,
    SolverError for a word without a meaning.
    """
    if (matrix.lower > matrix.upper).any():
        return Ending(Stopped.INFEASIBLE, None, None, -np.inf, 0.0)
    began = perf_counter()
    matrix = _bounded(matrix)
    steps = _steps(matrix)
    _require_whole_numbers_to_do(matrix, steps)
    model, variables = cp_model.CpModel(), []
    for low, high in zip(np.floor(matrix.lower / steps.size), np.ceil(matrix.upper / steps.size), strict=True):
        variables.append(model.new_int_var(int(low), int(high), ""))
    for k in range(len(matrix.row_lower)):
        _add_row(model, variables, matrix, steps, k, near=near)
    whole, scale, slack = _whole(matrix.money, steps, matrix)
    model.maximize(cp_model.LinearExpr.weighted_sum(variables, whole.tolist()))
    if hint is not None:
        for variable, step in zip(variables, np.round(hint / steps.size).astype(np.int64).tolist(), strict=True):
            model.add_hint(variable, step)
    solver = cp_model.CpSolver()
    solver.parameters.num_workers = 1
    solver.parameters.linearization_level = 2
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
        return Ending(stopped, None, None, np.inf if near else -np.inf, seconds)
    bound = (
        solver.best_objective_bound / scale + slack + matrix.constant if status != "UNKNOWN" and not near else np.inf
    )
    if status == "UNKNOWN":
        return Ending(stopped, None, None, bound, seconds)
    values = steps.size * np.array([solver.value(variable) for variable in variables], dtype=float)
    values = np.clip(values, matrix.lower, matrix.upper)
    return Ending(stopped, values, float(matrix.money @ values) + matrix.constant, bound, seconds)


def _bounded(matrix: Matrix) -> Matrix:
    """Bound the columns that have no upper bound by the rows they stand in: one pass does for what rules leave open."""
    upper = matrix.upper.copy()
    columns = matrix.rows.tocsc()
    for j in np.flatnonzero(~np.isfinite(upper)):
        place = slice(columns.indptr[j], columns.indptr[j + 1])
        for k, coefficient in zip(columns.indices[place], columns.data[place], strict=True):
            limit = matrix.row_upper[k] if coefficient > 0 else -matrix.row_lower[k]
            row = slice(matrix.rows.indptr[k], matrix.rows.indptr[k + 1])
            others = matrix.rows.indices[row] != j
            terms = np.sign(coefficient) * matrix.rows.data[row][others]
            members = matrix.rows.indices[row][others]
            least = np.minimum(terms * matrix.lower[members], terms * matrix.upper[members]).sum()
            if np.isfinite(limit) and np.isfinite(least):
                upper[j] = min(upper[j], (limit - least) / abs(coefficient))
    if not (np.isfinite(matrix.lower).all() and np.isfinite(upper).all()):
        raise BeyondWholeSteps("a column has no finite bound")
    return replace(matrix, upper=np.maximum(upper, matrix.lower))


def _require_whole_numbers_to_do(matrix: Matrix, steps: Steps) -> None:
    """Raise BeyondWholeSteps where sums over whole steps could leave 64 bits."""
    reach = np.maximum(np.abs(matrix.lower), np.abs(matrix.upper)) / steps.size + 1.0
    widest = float(reach.max(initial=0.0)) * COEFFICIENT * max(1, int(np.diff(matrix.rows.indptr).max(initial=1)))
    if max(widest, float(reach.max(initial=0.0)) * COEFFICIENT * len(reach)) > 2.0**62:
        raise BeyondWholeSteps("sums would leave 64 bits")


def _steps(matrix: Matrix) -> Steps:
    size = np.where(matrix.integer, 1.0, np.maximum(STEP, (matrix.upper - matrix.lower) / LARGEST))
    return Steps(size, np.where(matrix.integer, 0.0, size / 2))


def _whole(coefficients: Floats, steps: Steps, matrix: Matrix) -> tuple[np.ndarray, float, float]:
    """Round coefficients per step to whole numbers; give them, their scale, and the most that rounding can move."""
    per_step = coefficients * steps.size
    scale = _scale(per_step) if per_step.any() else 1.0
    whole = np.round(per_step * scale).astype(np.int64)
    reach = np.maximum(np.abs(matrix.lower), np.abs(matrix.upper)) / steps.size + 1.0
    moved = float(np.abs(whole / scale - per_step) @ reach)
    return whole, scale, moved + float(np.abs(coefficients) @ steps.lost)


def _scale(per_step: Floats) -> float:
    """Find a scale that makes coefficients whole: an exact small one where there is one, else a large one."""
    smallest = float(np.abs(per_step[per_step != 0]).min())
    for factor in EXACT_FACTORS:
        scaled = per_step * (factor / smallest)
        if np.abs(scaled - np.round(scaled)).max() < 1e-9 * np.abs(scaled).max() and np.abs(scaled).max() < COEFFICIENT:
            return factor / smallest
    return COEFFICIENT / float(np.abs(per_step).max())


def _down(value: float, loose: int) -> float:
    """Round a lower bound: outwards and one further where it may be loose, inwards where not."""
    return float(np.floor(value)) - loose if loose else float(np.ceil(value))


def _add_row(
    model: cp_model.CpModel, variables: list[cp_model.IntVar], matrix: Matrix, steps: Steps, k: int, *, near: bool
) -> None:
    """Add a row, loosened so that every feasible point has a whole one nearby that keeps it."""
    place = slice(matrix.rows.indptr[k], matrix.rows.indptr[k + 1])
    columns, coefficients = matrix.rows.indices[place], matrix.rows.data[place]
    if len(columns) == 0:
        return
    per_step = coefficients * steps.size[columns]
    scale = _scale(per_step)
    whole = np.round(per_step * scale).astype(np.int64)
    reach = np.maximum(np.abs(matrix.lower[columns]), np.abs(matrix.upper[columns])) / steps.size[columns] + 1.0
    slack = float(np.abs(whole / scale - per_step) @ reach) + float(np.abs(coefficients) @ steps.lost[columns])
    low, high = matrix.row_lower[k], matrix.row_upper[k]
    if near and low != high:
        slack = NEARLY / scale
    most = int(np.abs(whole).astype(float) @ reach) + 1
    loose = 0 if near and low != high else 1
    lower = -most if not np.isfinite(low) else max(-most, int(_down((low - slack) * scale, loose)))
    upper = most if not np.isfinite(high) else min(most, -int(_down(-(high + slack) * scale, loose)))
    expression = cp_model.LinearExpr.weighted_sum([variables[j] for j in columns], whole.tolist())
    model.add_linear_constraint(expression, lower, upper)
