"""The turn-on inequalities describe the hull of least up and down times: their relaxation has whole optima.

Rajan and Takriti, Minimum up/down polytopes of the unit commitment problem with start-up costs, IBM Research Report
RC23628, 2005 (title from memory). Checked through the rule's own rows, solved as a linear program.
"""

from dataclasses import dataclass, replace
from random import Random
from typing import Any

import numpy as np

from tests.workers.planning.jobs import generator, indexed, job, outage
from workers.planning.generator import GeneratorUnit
from workers.planning.instance import instance_of
from workers.planning.limits import Unwatched
from workers.planning.model import INFINITE, Model
from workers.planning.rules import unit_states
from workers.planning.rules.columns import GeneratorColumns, unit_columns
from workers.planning.solvers import highs
from workers.planning.units import Floats

SEED = 23628
OBJECTIVES = 400
WHOLE = 1e-6
RELAXED = highs.Effort(relative_gap=0.0, absolute_gap=0.0, seconds=10.0, seed=0)


@dataclass(frozen=True)
class Case:
    """A generator with its least times and its state before the window, and what an hour on and a start earn."""

    unit: GeneratorUnit
    on: Floats
    starts: Floats
    stops: Floats


def case_of(draw: Random, *, with_trips: bool) -> Case:
    count = draw.randint(2, 18)
    runner = generator(min_up_hours=draw.randint(0, 7), min_down_hours=draw.randint(0, 7))
    document: dict[str, Any] = job([0.0] * count, runner)
    document["initial"] = {"quay-g1": {"on": draw.random() < 0.5, "hours_in_state": draw.randint(0, 7)}}
    if with_trips:
        first = draw.randint(0, count - 1)
        document["outages"] = [outage("quay-g1", first, min(first + draw.randint(1, 3), count))]
    unit = instance_of(indexed(document)).units[0]
    assert isinstance(unit, GeneratorUnit)

    def money(least: float, most: float) -> Floats:
        return np.array([draw.uniform(least, most) for _ in range(count)])

    return Case(unit, money(-10.0, 10.0), money(-25.0, 0.0), money(-5.0, 0.0))


def relaxed(model: Model, case: Case, columns: GeneratorColumns) -> Floats:
    """Return whether it is on in the optimum of the LP relaxation, T values from 0 to 1."""
    model.earn(columns.is_on, case.on)
    model.earn(columns.starts, case.starts)
    model.earn(columns.stops, case.stops)
    matrix = highs.matrix_of(model.as_pyomo())
    ending = highs.solve(replace(matrix, integer=np.zeros_like(matrix.integer)), RELAXED, Unwatched())
    assert ending.values is not None
    return np.asarray(ending.values[columns.is_on])


def by_turn_on_inequalities(case: Case) -> Floats:
    model = Model()
    columns = unit_columns(model, case.unit, ())
    assert isinstance(columns, GeneratorColumns)
    unit_states.add(model, columns)
    return relaxed(model, case, columns)


def by_pairs(case: Case) -> Floats:
    """Write the same least times hour by hour, as textbooks do first: u[t] - u[t-1] <= u[k] within the least time."""
    model = Model()
    columns = unit_columns(model, case.unit, ())
    assert isinstance(columns, GeneratorColumns)
    on, starts, stops = columns.is_on, columns.starts, columns.stops
    model.rows(0.0, 0.0, (on[1:], 1.0), (on[:-1], -1.0), (starts[1:], -1.0), (stops[1:], 1.0))
    was_on = float(case.unit.was_on)
    model.rows(was_on, was_on, (on[:1], 1.0), (starts[:1], -1.0), (stops[:1], 1.0))
    for t in range(1, len(on)):
        for k in range(t + 1, min(t + case.unit.min_up, len(on))):
            model.row(-INFINITE, 0.0, (on[[t, t - 1, k]], np.array([1.0, -1.0, -1.0])))
        for k in range(t + 1, min(t + case.unit.min_down, len(on))):
            model.row(-INFINITE, 1.0, (on[[t - 1, t, k]], np.array([1.0, -1.0, 1.0])))
    return relaxed(model, case, columns)


def is_fractional(values: Floats) -> bool:
    return bool((np.abs(values - np.round(values)) > WHOLE).any())


def test_the_relaxation_is_whole_for_every_objective() -> None:
    draw = Random(SEED)
    fractional = [
        n for n in range(OBJECTIVES) if is_fractional(by_turn_on_inequalities(case_of(draw, with_trips=False)))
    ]
    print(f"seed {SEED}: {len(fractional)} of {OBJECTIVES} fractional")
    assert fractional == []


def test_the_relaxation_stays_whole_where_a_trip_ends_a_run() -> None:
    # No published result: a trip takes rows out and fixes columns, and the same argument holds on either side of it.
    draw = Random(SEED + 1)
    fractional = [
        n for n in range(OBJECTIVES) if is_fractional(by_turn_on_inequalities(case_of(draw, with_trips=True)))
    ]
    print(f"seed {SEED + 1}: {len(fractional)} of {OBJECTIVES} fractional")
    assert fractional == []


def test_least_times_written_pair_by_pair_are_not_whole() -> None:
    # The same objectives can tell: otherwise the two tests above would show nothing.
    draw = Random(SEED)
    assert sum(is_fractional(by_pairs(case_of(draw, with_trips=False))) for _ in range(OBJECTIVES)) > 0
