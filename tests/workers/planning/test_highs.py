"""HiGHS's words are all translated, and a stop leaves what is in hand."""

import threading
from dataclasses import replace

import highspy
import numpy as np
import pytest
from scipy.sparse import csr_matrix

from tests.workers.planning.jobs import indexed, job, store
from workers.planning.assembly import assemble
from workers.planning.instance import instance_of
from workers.planning.limits import StoppableWatch, Unwatched
from workers.planning.model import Model
from workers.planning.solvers import highs
from workers.planning.solvers.ending import SolverError, Stopped

EFFORT = highs.Effort(relative_gap=1e-6, absolute_gap=1e-6, seconds=20.0, seed=0)


def knapsack(capacity: float = 165.0) -> highs.Matrix:
    weights = np.array([23.0, 31, 29, 44, 53, 38, 63, 85, 89, 82])
    values = np.array([92.0, 57, 49, 68, 60, 43, 67, 84, 87, 72])
    model = Model()
    taken = model.columns(10, 0.0, 1.0, integer=True)
    model.earn(taken, values)
    model.row(-np.inf, capacity, (taken, weights))
    return highs.matrix_of(model.as_pyomo())


def test_every_status_of_highs_has_a_meaning() -> None:
    assert set(highs.MEANING) == set(highspy.HighsModelStatus.__members__)


def test_a_published_knapsack_is_solved_with_its_bound() -> None:
    # Instance p01 of the widely used collection of 0/1 knapsack problems: optimum 309 (from memory, and recomputed).
    ending = highs.solve(knapsack(), EFFORT, Unwatched())
    assert ending.stopped is Stopped.WITHIN_GAP
    assert ending.margin == pytest.approx(309.0)
    assert ending.bound == pytest.approx(309.0)


def test_an_infeasible_model_is_an_answer() -> None:
    matrix = replace(knapsack(), lower=np.ones(10))
    assert highs.solve(matrix, EFFORT, Unwatched()).stopped is Stopped.INFEASIBLE
    crossed = replace(knapsack(), lower=np.full(10, 2.0))
    assert highs.solve(crossed, EFFORT, Unwatched()).bound == -np.inf


def test_a_model_without_columns_earns_its_constant() -> None:
    model = Model()
    model.constant = -7.0
    ending = highs.solve(highs.matrix_of(model.as_pyomo()), EFFORT, Unwatched())
    assert (ending.margin, ending.bound) == (-7.0, -7.0)


def test_an_unbounded_model_is_our_fault() -> None:
    model = Model()
    model.earn(model.columns(1, 0.0, np.inf), 1.0)
    with pytest.raises(SolverError) as fault:
        highs.solve(highs.matrix_of(model.as_pyomo()), EFFORT, Unwatched())
    assert fault.value.solver == "HiGHS"


def test_a_model_that_highs_refuses_is_our_fault() -> None:
    matrix = replace(knapsack(), upper=np.full(10, np.nan))
    with pytest.raises(SolverError):
        highs.solve(matrix, EFFORT, Unwatched())


def test_no_time_is_no_proof() -> None:
    ending = highs.solve(hard(), replace(EFFORT, seconds=0.0), Unwatched())
    assert ending.stopped is Stopped.OUT_OF_TIME
    assert ending.bound > 0


def hard() -> highs.Matrix:
    """Return a market-split model, made to keep a solver busy (Cornuejols and Dawande 1998, from memory)."""
    draw = np.random.default_rng(5)
    model = Model()
    shares = model.columns(40, 0.0, 1.0, integer=True)
    over, under = model.columns(5, 0.0, 1e6), model.columns(5, 0.0, 1e6)
    for k in range(5):
        demand = draw.integers(0, 100, 40).astype(float)
        model.row(
            demand.sum() // 2, demand.sum() // 2, (shares, demand), (over[k : k + 1], -1.0), (under[k : k + 1], 1.0)
        )
    model.earn(np.concatenate([over, under]), -1.0)
    model.constant = 1e3
    return highs.matrix_of(model.as_pyomo())


def test_a_stop_from_another_thread_ends_the_solve_with_what_is_in_hand() -> None:
    watch = StoppableWatch()
    timer = threading.Timer(1.0, watch.ask_stop)
    timer.start()
    ending = highs.solve(hard(), replace(EFFORT, seconds=120.0), watch)
    timer.join()
    assert ending.stopped is Stopped.INTERRUPTED
    assert ending.margin is not None
    assert ending.bound >= ending.margin


def test_a_solve_begun_after_the_stop_ends_at_once() -> None:
    watch = StoppableWatch()
    watch.ask_stop()
    assert highs.solve(hard(), replace(EFFORT, seconds=120.0), watch).stopped is Stopped.INTERRUPTED


def test_pyomo_holds_the_model_that_highs_is_given() -> None:
    instance = instance_of(indexed(job([10.0, 20.0, 5.0], store())))
    matrix = assemble(instance, [np.ones(3, dtype=bool)]).matrix
    assert isinstance(matrix.rows, csr_matrix)
    assert matrix.rows.shape == (len(matrix.row_lower), len(matrix.money))
    assert int(matrix.integer.sum()) == 3
