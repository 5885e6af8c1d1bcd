"""All the ways in which a set cannot hold together, and all the ways out: an enumerator that knows nothing of energy.

A *conflict* is a set that is impossible while each of its members can be spared: without any one of them the rest is
possible. A *cure* is a smallest set whose leaving out makes all that is left possible. Each conflict shares a member
with each cure, and each follows from all of the other kind (hitting-set duality; Reiter 1987). The enumerator is MARCO:
a map of the subsets not yet explained, of which the largest is tried; what is possible marks all its subsets as such,
what is not is shrunk to a conflict, which marks all its supersets (Liffiton, Previti, Malik and Marques-Silva,
Constraints 21(2), 2016). Subsets of what is possible are taken to be possible.
"""

from collections.abc import Callable, Collection, Hashable, Iterator, Sequence
from typing import Generic, TypeVar

from ortools.sat.python import cp_model

Member = TypeVar("Member", bound=Hashable)

CHUNKS = 4
"""Shrinking first tries to spare a quarter of the set at a time."""


def shrink(
    members: Collection[Member],
    is_possible: Callable[[frozenset[Member]], bool],
    order: Sequence[Member],
    is_likely: Callable[[frozenset[Member]], bool] | None = None,
) -> frozenset[Member]:
    """Shrink an impossible set to a conflict; members that come early in `order` are spared first.

    The deletion filter (Chinneck, Feasibility and Infeasibility in Optimization, 2008; from memory), in chunks that
    double where they can be spared and halve where not. On the way `is_likely` may answer, which may err towards
    possible. Every member of the result is dropped once more, from the result itself: where that is still impossible,
    the smaller set is shrunk.
    """
    found = frozenset(members)
    while True:
        found = _filtered([member for member in order if member in found], is_likely or is_possible)
        spare = next((member for member in order if member in found and not is_possible(found - {member})), None)
        if spare is None:
            return found
        found -= {spare}


def _filtered(candidates: list[Member], is_possible: Callable[[frozenset[Member]], bool]) -> frozenset[Member]:
    needed: set[Member] = set()
    size = max(1, len(candidates) // CHUNKS)
    while candidates:
        rest = candidates[size:]
        if not is_possible(frozenset(rest) | needed):
            candidates, size = rest, size * 2
        elif size == 1:
            needed.add(candidates[0])
            candidates = rest
        else:
            size = max(1, size // 2)
    return frozenset(needed)


def independent_conflicts(
    members: Sequence[Member],
    is_possible: Callable[[frozenset[Member]], bool],
    known: Collection[frozenset[Member]] = (),
    is_likely: Callable[[frozenset[Member]], bool] | None = None,
) -> Iterator[frozenset[Member]]:
    """Find conflicts that share no member with each other nor with the known ones, until what is left is possible."""
    left = frozenset(members).difference(*known)
    while not is_possible(left):
        conflict = shrink(left, is_possible, members, is_likely)
        yield conflict
        left -= conflict
        if not conflict:
            return


class Enumeration(Generic[Member]):
    """Walk through all conflicts and cures of a set, in no order of its own; known conflicts are not found again."""

    def __init__(
        self,
        members: Sequence[Member],
        is_possible: Callable[[frozenset[Member]], bool],
        known: Collection[frozenset[Member]] = (),
    ) -> None:
        self.conflicts: list[frozenset[Member]] = []
        self.cures: list[frozenset[Member]] = []
        self.is_complete = False
        self._members = tuple(members)
        self._is_possible = is_possible
        self._model = cp_model.CpModel()
        self._kept = {member: self._model.new_bool_var("") for member in self._members}
        self._model.maximize(sum(self._kept.values()))
        for conflict in known:
            self._note_conflict(conflict)

    def steps(self) -> Iterator[None]:
        """Explain one more subset per step; ends when all are explained."""
        while (largest := self._largest()) is not None:
            if self._is_possible(largest):
                self.cures.append(frozenset(self._members) - largest)
                self._model.add_bool_or([self._kept[member] for member in self.cures[-1]])
            else:
                self._note_conflict(shrink(largest, self._is_possible, self._members))
            yield
        self.is_complete = True

    def _note_conflict(self, conflict: frozenset[Member]) -> None:
        self.conflicts.append(conflict)
        self._model.add_bool_or([self._kept[member].negated() for member in conflict])

    def _largest(self) -> frozenset[Member] | None:
        solver = cp_model.CpSolver()
        solver.parameters.num_workers = 1
        if solver.solve(self._model) != cp_model.OPTIMAL:
            return None
        return frozenset(member for member, kept in self._kept.items() if solver.value(kept))
