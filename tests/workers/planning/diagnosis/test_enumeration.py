"""The enumerator finds all conflicts and all cures of published systems, and of any random one.

Sources, in tests/reference/infeasible_systems.json: the running example of MARCO (Liffiton, Previti, Malik and
Marques-Silva, Constraints 21(2), 2016); the example of Liffiton and Sakallah, J. Automated Reasoning 40, 2008 (from
memory); five rows checked by the vertices of Gleeson and Ryan, ORSA J. Computing 2(1), 1990; a store's conflict checked
over all 2^8 subsets. Duality of conflicts and cures: Reiter, Artificial Intelligence 32, 1987 (from memory).
"""

import json
from collections.abc import Callable, Iterable, Sequence
from itertools import chain, combinations, product
from pathlib import Path
from random import Random
from typing import Any

import numpy as np
import pytest
from scipy.optimize import Bounds, LinearConstraint, linprog, milp

from workers.planning.diagnosis.enumeration import Enumeration, independent_conflicts, shrink

SYSTEMS = json.loads((Path(__file__).parents[3] / "reference" / "infeasible_systems.json").read_text())
Sets = set[frozenset[int]]
Question = Callable[[frozenset[int]], bool]


def sets(listed: Iterable[Iterable[int]]) -> Sets:
    return {frozenset(each) for each in listed}


def enumerate_all(
    members: Sequence[int], is_possible: Question, known: Sequence[frozenset[int]] = ()
) -> Enumeration[int]:
    search = Enumeration(members, is_possible, known)
    for _ in search.steps():
        pass
    assert search.is_complete
    return search


def minimal_hitting_sets(of: Sets) -> Sets:
    everything = sorted(frozenset().union(*of))
    found: Sets = set()
    for size in range(len(everything) + 1):
        for chosen in map(frozenset, combinations(everything, size)):
            if all(chosen & each for each in of) and not any(smaller <= chosen for smaller in found):
                found.add(chosen)
    return found


def satisfiable(clauses: Sequence[str]) -> Question:
    """Tell by every assignment whether clauses like "not a or b" can hold together."""
    names = sorted({word for clause in clauses for word in clause.split() if word not in ("not", "or")})

    def holds(clause: str, truth: dict[str, bool]) -> bool:
        literals = (literal.split() for literal in clause.split(" or "))
        return any(truth[words[-1]] != (words[0] == "not") for words in literals)

    def is_possible(kept: frozenset[int]) -> bool:
        return any(
            all(holds(clauses[number - 1], dict(zip(names, values, strict=True))) for number in kept)
            for values in product((False, True), repeat=len(names))
        )

    return is_possible


@pytest.mark.parametrize("name", ["marco_running_example", "camus_example"])
def test_clauses_have_the_published_conflicts_and_cures(name: str) -> None:
    system = SYSTEMS[name]
    search = enumerate_all(range(1, len(system["clauses"]) + 1), satisfiable(system["clauses"]))
    assert set(search.conflicts) == sets(system["MUS"])
    assert set(search.cures) == sets(system["MCS"])
    assert len(search.conflicts) + len(search.cures) == len(system["MUS"]) + len(system["MCS"])


ROWS = {1: ([1, 1], 1.0), 2: ([-1, 0], -1.0), 3: ([0, -1], -1.0), 4: ([1, 0], 0.5), 5: ([-1, 1], -2.0)}
"""x+y <= 1, x >= 1, y >= 1, x <= 0.5, x-y >= 2, each as a*x <= b."""


def test_rows_have_the_conflicts_of_exhaustion_and_of_gleeson_and_ryan() -> None:
    def is_possible(kept: frozenset[int]) -> bool:
        rows = [ROWS[number] for number in sorted(kept)]
        if not rows:
            return True
        ended = linprog([0, 0], A_ub=[row for row, _ in rows], b_ub=[b for _, b in rows], bounds=(None, None))
        return bool(ended.status == 0)

    search = enumerate_all(sorted(ROWS), is_possible)
    assert set(search.conflicts) == sets(SYSTEMS["lp_five_rows"]["IIS"])
    assert set(search.cures) == sets(SYSTEMS["lp_five_rows"]["MCS"])


def storage_is_possible(kept: frozenset[int], *, exclusive: bool = True) -> bool:
    """Tell whether a store can keep groups of constraints of the stored system, by a program of its own.

    Columns: charging and discharging power in 6 hours, 1 where it discharges, energy before the first hour. Left out, a
    group leaves: 1 energy above capacity, 2 any energy at first, 3 any power in both directions at once.
    """
    hours, big = 6, 50.0
    columns = 3 * hours + 1
    limit = 1.0 if 3 in kept else big
    rows: list[Any] = []

    def row(pairs: dict[int, float], lower: float, upper: float) -> None:
        coefficients = np.zeros(columns)
        for column, value in pairs.items():
            coefficients[column] = value
        rows.append(LinearConstraint(coefficients, lower, upper))

    for t in range(hours):
        stored = {columns - 1: 1.0} | dict.fromkeys(range(t + 1), 1.0) | {hours + k: -1.0 for k in range(t + 1)}
        row(stored, 0.0, 2.0 if 1 in kept else np.inf)
        if exclusive and 3 in kept:
            row({t: 1.0, 2 * hours + t: limit}, -np.inf, limit)
            row({hours + t: 1.0, 2 * hours + t: -limit}, -np.inf, 0.0)
        if t >= 1 and 3 + t in kept:
            row({hours + t: 1.0}, 0.5, np.inf)
    lower, upper = np.zeros(columns), np.full(columns, limit)
    upper[2 * hours : 3 * hours] = 1.0
    upper[-1] = 0.0 if 2 in kept else (2.0 if 1 in kept else big)
    whole = np.zeros(columns)
    whole[2 * hours : 3 * hours] = 1.0
    ended = milp(np.zeros(columns), constraints=rows, bounds=Bounds(lower, upper), integrality=whole)
    return bool(ended.status == 0)


def test_a_store_has_its_two_conflicts_and_seven_cures_which_a_relaxation_misses() -> None:
    search = enumerate_all(range(1, 9), storage_is_possible)
    assert set(search.conflicts) == sets(SYSTEMS["storage_commitment"]["MUS"])
    assert set(search.cures) == sets(SYSTEMS["storage_commitment"]["MCS"])
    assert storage_is_possible(frozenset(range(1, 9)), exclusive=False)


def upward_closed(draw: Random, count: int) -> tuple[Question, Sets]:
    """Draw conflicts over some members; what contains none of them is possible."""
    drawn = {frozenset(draw.sample(range(count), draw.randint(1, 4))) for _ in range(draw.randint(1, 6))}
    conflicts = {each for each in drawn if not any(other < each for other in drawn)}
    return (lambda kept: not any(conflict <= kept for conflict in conflicts)), conflicts


def test_conflicts_and_cures_are_each_others_minimal_hitting_sets() -> None:
    draw = Random(1987)
    for _ in range(60):
        count = draw.randint(4, 9)
        is_possible, conflicts = upward_closed(draw, count)
        search = enumerate_all(range(count), is_possible)
        assert set(search.conflicts) == conflicts
        assert set(search.cures) == minimal_hitting_sets(conflicts)
        assert minimal_hitting_sets(set(search.cures)) == conflicts


def test_known_conflicts_are_not_found_twice() -> None:
    is_possible, conflicts = upward_closed(Random(4), 8)
    known = sorted(conflicts, key=sorted)[:1]
    search = enumerate_all(range(8), is_possible, known)
    assert len(search.conflicts) == len(set(search.conflicts)) == len(conflicts)


def test_independent_conflicts_share_nothing_and_leave_something_possible() -> None:
    draw = Random(11)
    for _ in range(40):
        is_possible, conflicts = upward_closed(draw, 9)
        found = list(independent_conflicts(range(9), is_possible))
        assert set(found) <= conflicts
        assert sum(map(len, found)) == len(frozenset(chain(*found)))
        assert is_possible(frozenset(range(9)).difference(*found))


def test_what_comes_early_in_the_order_is_spared_first() -> None:
    is_possible = lambda kept: not ({1, 2} <= kept or {2, 3} <= kept)  # noqa: E731
    assert shrink({1, 2, 3}, is_possible, [1, 2, 3]) == {2, 3}
    assert shrink({1, 2, 3}, is_possible, [3, 2, 1]) == {1, 2}


def test_a_conflict_is_irreducible_even_where_a_smaller_set_is_impossible_and_a_larger_one_is_not() -> None:
    # Without an outage a ramp binds again: {1, 2} is possible, {1} is not, and neither is {1, 2, 3}.
    impossible = {frozenset({1}), frozenset({1, 2, 3}), frozenset({1, 3})}
    found = shrink({1, 2, 3}, lambda kept: kept not in impossible, [3, 2, 1])
    assert found == {1}


def test_what_is_impossible_by_itself_is_an_empty_conflict() -> None:
    assert list(independent_conflicts([1, 2], lambda kept: False)) == [frozenset()]  # noqa: ARG005
