"""HiGHS behind Pyomo: a direct writer from the kernel block to its arrays, and its words in ours.

Pyomo's own interface to HiGHS walks every row again; a matrix constraint is handed over as it is.
"""

from dataclasses import dataclass
from time import perf_counter
from typing import Any

import highspy
import numpy as np
from highspy import HighsModelStatus as Status
from numpy.typing import NDArray
from scipy.sparse import csr_matrix

from workers.planning.limits import Watch
from workers.planning.solvers.ending import Ending, SolverError, Stopped

INFINITE = float("inf")

FEASIBILITY = 1e-9
"""Tolerance of rows, bounds and integrality: tighter than the audit's, which recomputes stored energy by summing up."""

MEANING: dict[str, Stopped | None] = {
    "kOptimal": Stopped.WITHIN_GAP,
    "kInfeasible": Stopped.INFEASIBLE,
    "kTimeLimit": Stopped.OUT_OF_TIME,
    "kInterrupt": Stopped.INTERRUPTED,
    "kUnboundedOrInfeasible": None,
    "kHighsInterrupt": Stopped.INTERRUPTED,
    "kModelEmpty": Stopped.WITHIN_GAP,
    "kNotset": None,
    "kLoadError": None,
    "kModelError": None,
    "kPresolveError": None,
    "kSolveError": None,
    "kPostsolveError": None,
    "kUnbounded": None,
    "kObjectiveBound": None,
    "kObjectiveTarget": None,
    "kIterationLimit": None,
    "kSolutionLimit": None,
    "kMemoryLimit": None,
    "kUnknown": None,
}
"""Every status of HiGHS by its name; None is a fault here: no such limit is set, and what earns is bounded."""


@dataclass(frozen=True)
class Effort:
    """What a solve may take: gaps as HiGHS reads them, seconds, the seed of its random choices."""

    relative_gap: float
    absolute_gap: float
    seconds: float
    seed: int


@dataclass(frozen=True)
class Matrix:
    """A model as HiGHS takes it; `maximise` is implied."""

    money: NDArray[np.float64]
    constant: float
    lower: NDArray[np.float64]
    upper: NDArray[np.float64]
    integer: NDArray[np.bool_]
    rows: csr_matrix
    row_lower: NDArray[np.float64]
    row_upper: NDArray[np.float64]


def matrix_of(block: Any) -> Matrix:
    """Read the arrays of a Pyomo kernel block made by `Model.as_pyomo`; Pyomo writes None for an infinite bound."""
    variables = list(block.variables)
    count = len(variables)
    money = np.zeros(count)
    expression = block.margin.expr.expr
    numbers = {id(variable): k for k, variable in enumerate(variables)}
    for coefficient, variable in zip(expression.linear_coefs, expression.linear_vars, strict=True):
        money[numbers[id(variable)]] = coefficient
    rows = getattr(block, "rows", None)
    return Matrix(
        money=money,
        constant=float(expression.constant),
        lower=np.array([-INFINITE if variable.lb is None else variable.lb for variable in variables], dtype=float),
        upper=np.array([INFINITE if variable.ub is None else variable.ub for variable in variables], dtype=float),
        integer=np.array([variable.is_integer() for variable in variables], dtype=bool),
        rows=csr_matrix((0, count)) if rows is None else rows.A,
        row_lower=np.zeros(0) if rows is None else rows.lb,
        row_upper=np.zeros(0) if rows is None else rows.ub,
    )


def solve(matrix: Matrix, effort: Effort, watch: Watch) -> Ending:
    """Maximise.

    No feasible point is handed over to begin from: HiGHS 1.16 takes the point's objective without what presolve has
    moved into the constant, and cuts off by it (seen: an optimum of -92.20 reported and "proven" as -78.70).

    Raises SolverError on any word of HiGHS that is neither an answer nor a limit we set.
    """
    if (matrix.lower > matrix.upper).any():
        return Ending(Stopped.INFEASIBLE, None, None, -INFINITE, 0.0)
    if len(matrix.money) == 0:
        return Ending(Stopped.WITHIN_GAP, np.zeros(0), matrix.constant, matrix.constant, 0.0)
    began = perf_counter()
    solver = _solver(matrix, effort)
    if watch.is_stoppable:
        solver.HandleUserInterrupt = True
    with watch.solving(solver.cancelSolve):
        _run(solver)
        if solver.getModelStatus() == Status.kUnboundedOrInfeasible:
            solver.setOptionValue("presolve", "off")
            _run(solver)
    status = solver.getModelStatus()
    stopped = MEANING.get(status.name)
    if stopped is None:
        raise SolverError("HiGHS", status.name)
    return _ending(solver, matrix, stopped, perf_counter() - began)


def fixed(matrix: Matrix, values: NDArray[np.float64]) -> Matrix:
    """Fix the integer columns to given values, rounded: what is left is linear."""
    whole = np.round(values)
    return Matrix(
        money=matrix.money,
        constant=matrix.constant,
        lower=np.where(matrix.integer, whole, matrix.lower),
        upper=np.where(matrix.integer, whole, matrix.upper),
        integer=np.zeros_like(matrix.integer),
        rows=matrix.rows,
        row_lower=matrix.row_lower,
        row_upper=matrix.row_upper,
    )


def _solver(matrix: Matrix, effort: Effort) -> highspy.Highs:
    solver = highspy.Highs()
    options = {
        "output_flag": False,
        # one thread count per process: a second one ends in kNotset, and parts are solved side by side anyway
        "threads": 1,
        "random_seed": effort.seed,
        "time_limit": max(effort.seconds, 0.0),
        "mip_rel_gap": effort.relative_gap,
        "mip_abs_gap": effort.absolute_gap,
        "primal_feasibility_tolerance": FEASIBILITY,
        "dual_feasibility_tolerance": FEASIBILITY,
        "mip_feasibility_tolerance": FEASIBILITY,
    }
    for name, value in options.items():
        if solver.setOptionValue(name, value) != highspy.HighsStatus.kOk:
            raise SolverError("HiGHS", f"option {name} refused")
    if solver.passModel(_program(matrix)) == highspy.HighsStatus.kError:
        raise SolverError("HiGHS", "model refused")
    return solver


def _program(matrix: Matrix) -> highspy.HighsLp:
    program = highspy.HighsLp()
    program.num_col_, program.num_row_ = len(matrix.money), len(matrix.row_lower)
    program.sense_ = highspy.ObjSense.kMaximize
    program.offset_ = matrix.constant
    program.col_cost_ = matrix.money
    program.col_lower_, program.col_upper_ = matrix.lower, matrix.upper
    program.row_lower_, program.row_upper_ = matrix.row_lower, matrix.row_upper
    program.a_matrix_.format_ = highspy.MatrixFormat.kRowwise
    program.a_matrix_.num_col_, program.a_matrix_.num_row_ = program.num_col_, program.num_row_
    program.a_matrix_.start_ = matrix.rows.indptr
    program.a_matrix_.index_ = matrix.rows.indices
    program.a_matrix_.value_ = matrix.rows.data
    if matrix.integer.any():
        kinds = (highspy.HighsVarType.kContinuous, highspy.HighsVarType.kInteger)
        program.integrality_ = [kinds[whole] for whole in matrix.integer.tolist()]
    return program


def _run(solver: highspy.Highs) -> None:
    if solver.run() == highspy.HighsStatus.kError:
        raise SolverError("HiGHS", f"error, {solver.getModelStatus()}")


def _ending(solver: highspy.Highs, matrix: Matrix, stopped: Stopped, seconds: float) -> Ending:
    if stopped is Stopped.INFEASIBLE:
        return Ending(stopped, None, None, -INFINITE, seconds)
    information = solver.getInfo()
    has_point = information.primal_solution_status == highspy.SolutionStatus.kSolutionStatusFeasible
    is_mip = bool(matrix.integer.any())
    if is_mip:
        bound = float(information.mip_dual_bound)
    else:
        bound = float(information.objective_function_value) if stopped is Stopped.WITHIN_GAP else INFINITE
    if not has_point:
        return Ending(stopped, None, None, bound, seconds)
    values = np.array(solver.getSolution().col_value)
    return Ending(stopped, values, float(information.objective_function_value), bound, seconds)
