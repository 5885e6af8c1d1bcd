"""The least changes that make a part possible: one lever where one does, several together where none does alone."""

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from itertools import combinations

from workers.planning.diagnosis.elements import Element
from workers.planning.diagnosis.enumeration import shrink
from workers.planning.diagnosis.feasibility import Solving
from workers.planning.diagnosis.levers import levers_of
from workers.planning.diagnosis.levers.lever import Lever, Values
from workers.planning.diagnosis.localise import Trouble

MOST_LEVERS_TOGETHER = 4
MOST_COMBINED = 6
"""Combined cures that are looked for where no single lever does."""


@dataclass(frozen=True)
class Move:
    """A lever, and to which of its steps."""

    lever: Lever
    step: int

    @property
    def values(self) -> Values:
        """Values by pointer into the request."""
        return self.lever.values(self.step)


Cure = tuple[Move, ...]


def cures_of(trouble: Trouble, solving: Solving, guesses: Mapping[str, float]) -> Iterator[Cure]:
    """Give the least changes that cure a part, single ones first; `guesses` are figures by the pointer of a lever.

    Raises CutShort.
    """
    search = _Search(trouble, solving, guesses)
    levers = search.levers()
    found = False
    for lever in levers:
        if all(lever.covers & conflict for conflict in trouble.conflicts) and (cure := search.least((lever,))):
            found = True
            yield cure
    if not found:
        yield from search.combined(levers)


class _Search:
    def __init__(self, trouble: Trouble, solving: Solving, guesses: Mapping[str, float]) -> None:
        self._trouble = trouble
        self._solving = solving
        self._guesses = guesses
        self._tried: dict[frozenset[tuple[Lever, int]], bool] = {}

    def levers(self) -> list[Lever]:
        """List the levers of all that is named, and make sure that all of them together would do.

        A conflict that they leave is taken note of, with its levers; none where a conflict has no lever at all.
        """
        while True:
            named = frozenset().union(*self._trouble.conflicts)
            levers = levers_of(self._trouble.scope, [e for e in self._trouble.scope.elements if e in named])
            eased = frozenset[Element]().union(*(lever.covers for lever in levers))
            if any(eased.isdisjoint(conflict) for conflict in self._trouble.conflicts):
                return []
            if self._would_do(eased):
                return sorted(levers, key=lambda lever: lever.pointer not in self._guesses)

    def least(self, levers: tuple[Lever, ...]) -> Cure | None:
        """Find the least steps of some levers that cure together, one after the other; None where all do not."""
        steps = {lever: lever.steps for lever in levers}
        if not self._is_cured(steps):
            return None
        for lever in levers:
            without = steps | {lever: 0}
            steps[lever] = 0 if self._is_cured(without) else self._least_step(lever, steps)
        return tuple(Move(lever, step) for lever, step in steps.items() if step > 0)

    def combined(self, levers: list[Lever]) -> Iterator[Cure]:
        """Cure by several levers that together touch every conflict; conflicts that show up on the way are added."""
        found: list[frozenset[str]] = []
        for size in range(2, MOST_LEVERS_TOGETHER + 1):
            for chosen in combinations(levers, size):
                names = frozenset(lever.pointer for lever in chosen)
                if len(names) < size or any(known <= names for known in found):
                    continue
                if not all(any(lever.covers & c for lever in chosen) for c in self._trouble.conflicts):
                    continue
                if not self._would_do(frozenset[Element]().union(*(lever.covers for lever in chosen))):
                    continue
                if cure := self.least(chosen):
                    found.append(frozenset(move.lever.pointer for move in cure))
                    yield cure
                    if len(found) == MOST_COMBINED:
                        return
            if found:
                return

    def _would_do(self, eased: frozenset[Element]) -> bool:
        """Tell whether leaving out all that is eased would cure; what still conflicts is taken note of."""
        trouble = self._trouble
        is_possible = trouble.tester(self._solving)
        rest = frozenset(trouble.scope.elements) - eased
        if is_possible(rest):
            return True
        trouble.conflicts.append(shrink(rest, is_possible, trouble.scope.elements))
        return False

    def _is_cured(self, steps: Mapping[Lever, int]) -> bool:
        moved = frozenset((lever, step) for lever, step in steps.items() if step)
        if not moved:
            return False
        if moved not in self._tried:
            job = self._trouble.scope.job
            for lever, step in steps.items():
                job = lever.apply(job, step) if step else job
            self._tried[moved] = self._solving.is_possible(self._trouble.scope.instance_of(job))
        return self._tried[moved]

    def _least_step(self, lever: Lever, steps: Mapping[Lever, int]) -> int:
        """Find the step that cures while the one before does not; step 0 is known not to, the last one to."""

        def cures(step: int) -> bool:
            return self._is_cured({**steps, lever: step})

        return least_step(cures, lever.steps, self._guess(lever))

    def _guess(self, lever: Lever) -> int | None:
        figure = self._guesses.get(lever.pointer)
        if figure is None:
            return None
        return least_step(lambda step: float(lever.shown(step)) <= figure + 1e-9, lever.steps, None)


def least_step(cures: Callable[[int], bool], last: int, guess: int | None) -> int:
    """Find a step that cures while the one before it does not, by halving, near a guess first."""
    fails, works = 0, last
    if guess is not None and 0 < guess < last:
        if cures(guess):
            works = guess
            if guess > 1 and cures(guess - 1):
                works = guess - 1
            else:
                return guess
        else:
            fails = guess
    while works - fails > 1:
        middle = (fails + works) // 2
        if cures(middle):
            works = middle
        else:
            fails = middle
    return works
