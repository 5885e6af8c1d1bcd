"""The least changes that make a part possible: one lever where one does, several together where none does alone."""

from collections.abc import Callable, Collection, Iterator, Mapping
from dataclasses import dataclass, field
from itertools import combinations

from workers.planning.diagnosis.elements import Element
from workers.planning.diagnosis.enumeration import shrink
from workers.planning.diagnosis.feasibility import CutShort, Possible, Solving
from workers.planning.diagnosis.levers import levers_of
from workers.planning.diagnosis.levers.lever import Lever, Values
from workers.planning.diagnosis.localise import Trouble
from workers.planning.diagnosis.scope import Scope
from workers.planning.earlier import Earlier
from workers.planning.instance import Instance

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


@dataclass(frozen=True)
class Cure:
    """What is moved together, and what the units do then where a solver found that out."""

    moves: tuple[Move, ...]
    plans: Earlier = field(default_factory=dict)

    @property
    def places(self) -> frozenset[tuple[str, str]]:
        """Name the levers, whatever their steps."""
        return frozenset((move.lever.pointer, move.lever.unit) for move in self.moves)


@dataclass(frozen=True)
class Figure:
    """Hours or energy that a commitment can have, at most where that `is_most`, and what the units do then.

    Asking for no more `cures` where nothing else stands in the way.
    """

    attainable: float
    is_most: bool
    cures: bool
    plans: Earlier


STRIDE = 4
"""Strides towards a step that cures grow by this factor."""

QUESTION_SHARE = 0.1
LEAST_QUESTION_SECONDS = 1.0
"""Whether a step cures may take this share of the time left, or so many seconds; a larger step is tried then."""


class CureSearch:
    """The search for the cures of a part; it goes on where it was left, with the time it is given then.

    It `leaves_open` whether less would do where a step took too long to be judged.
    """

    def __init__(self, trouble: Trouble) -> None:
        self.cures: list[Cure] = []
        self.is_done = False
        self.leaves_open = False
        self._trouble = trouble
        self._reached: Mapping[str, Figure] = {}
        self._tried: dict[frozenset[tuple[Lever, int]], Possible | None] = {}
        self._search: Iterator[Cure] | None = None
        self._solving: Solving | None = None

    def learn(self, reached: Mapping[str, Figure]) -> None:
        """Take over the figures of commitments known by now, by the pointer of the lever that asks for them.

        A cure that asks for fewer hours than can be had is looked for anew.
        """
        self._reached = reached
        lasting = [cure for cure in self.cures if not self._is_outdone(cure)]
        if len(lasting) < len(self.cures):
            self.cures, self._search, self.is_done = lasting, None, False

    def _is_outdone(self, cure: Cure) -> bool:
        [move, *others] = cure.moves
        known = None if others else self._known(move.lever)
        return known is not None and known.moves != cure.moves

    def go_on(self, solving: Solving, most: int | None = None) -> None:
        """Look for cures until there are `most` of them, or no more; raises CutShort."""
        self._solving = solving
        self._tried = {moved: answer for moved, answer in self._tried.items() if answer is not None}
        if self._search is None:
            self._search = self._all()
        while not self.is_done and (most is None or len(self.cures) < most):
            try:
                cure = next(self._search, None)
            except CutShort:
                self._search = None  # it begins anew, and knows what was tried
                raise
            if cure is None:
                self.is_done = True
            elif not any(cure.places == known.places for known in self.cures):
                self.cures.append(cure)

    def _all(self) -> Iterator[Cure]:
        """Give the least changes that cure, single ones first."""
        levers = self._levers()
        found = False
        for lever in levers:
            if all(lever.covers & conflict for conflict in self._trouble.conflicts) and (cure := self._least((lever,))):
                found = True
                yield cure
        if not found:
            yield from self._combined(self._levers())

    def _levers(self) -> list[Lever]:
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
                return sorted(levers, key=lambda lever: lever.pointer not in self._reached)

    def _least(self, levers: tuple[Lever, ...]) -> Cure | None:
        """Find the least steps of some levers that cure together, one after the other; None where all do not."""
        if len(levers) == 1 and (known := self._known(levers[0])):
            return known
        needed = {lever: self._needed_at_home(lever, levers) for lever in levers}
        if all(needed.values()) and self._is_cured(needed):
            return self._cure(needed)
        steps = {lever: lever.steps for lever in levers}
        if not self._is_cured(steps):
            return None
        for lever in levers:
            without = steps | {lever: 0}
            steps[lever] = 0 if self._is_cured(without) else self._least_step(lever, steps, needed[lever])
        return self._cure(steps)

    def _cure(self, steps: Mapping[Lever, int]) -> Cure:
        """Write down steps that were tried and do."""
        moved = {lever: step for lever, step in steps.items() if step > 0}
        known = self._tried.get(frozenset(moved.items()))
        moves = tuple(Move(lever, step) for lever, step in moved.items())
        return Cure(moves) if known is None else Cure(moves, known.plans)

    def _needed_at_home(self, lever: Lever, levers: Collection[Lever]) -> int:
        """Give a step below which a lever cannot cure: what a smaller scope of the part needs, all else at its loosest.

        0 where no conflict that it eases was found in a smaller scope.
        """
        needed = 0
        for home in {id(home): home for home in self._trouble.homes.values()}.values():
            chosen = {(other.pointer, other.unit) for other in levers}
            own = [each for each in levers_of(home, home.elements) if (each.pointer, each.unit) in chosen]
            moved = next((each for each in own if (each.pointer, each.unit) == (lever.pointer, lever.unit)), None)
            if moved is not None:
                needed = max(needed, self._least_at_home(moved, [each for each in own if each is not moved], home))
        return min(needed, lever.steps)

    def _least_at_home(self, moved: Lever, others: Collection[Lever], home: Scope) -> int:
        job = home.job
        for other in others:
            job = other.apply(job, other.steps)

        def is_possible(step: int) -> bool:
            return self._time().is_possible(home.instance_of(moved.apply(job, step) if step else job))

        if is_possible(0):
            return 0
        return least_step(is_possible, 0, moved.steps, self._guess(moved)) if is_possible(moved.steps) else moved.steps

    def _combined(self, levers: list[Lever]) -> Iterator[Cure]:
        """Cure by several levers that together touch every conflict; conflicts that show up on the way are added.

        First by levers that each touch most of what is left, however many it takes; then by few.
        """
        found: list[frozenset[str]] = []
        if (chosen := self._touching_most(levers)) and (cure := self._least(chosen)):
            found.append(frozenset(move.lever.pointer for move in cure.moves))
            yield cure
        for size in range(2, MOST_LEVERS_TOGETHER + 1):
            for chosen in combinations(levers, size):
                names = frozenset(lever.pointer for lever in chosen)
                if len(names) < size or any(known <= names for known in found):
                    continue
                if not all(any(lever.covers & c for lever in chosen) for c in self._trouble.conflicts):
                    continue
                if not self._would_do(frozenset[Element]().union(*(lever.covers for lever in chosen))):
                    continue
                if cure := self._least(chosen):
                    found.append(frozenset(move.lever.pointer for move in cure.moves))
                    yield cure
                    if len(found) == MOST_COMBINED:
                        return
            if found:
                return

    def _touching_most(self, levers: list[Lever]) -> tuple[Lever, ...]:
        """Choose levers that together would do: each time the one that touches most of the conflicts left."""
        chosen: list[Lever] = []
        while levers:
            conflicts = self._trouble.conflicts
            left = [c for c in conflicts if not any(lever.covers & c for lever in chosen)]
            if left:
                best = max(levers, key=lambda lever: sum(bool(lever.covers & conflict) for conflict in left))
                if not any(best.covers & conflict for conflict in left):
                    return ()
                chosen.append(best)
            elif self._would_do(frozenset[Element]().union(*(lever.covers for lever in chosen))):
                return tuple(chosen)
        return ()

    def _would_do(self, eased: frozenset[Element]) -> bool:
        """Tell whether leaving out all that is eased would cure; what still conflicts is taken note of."""
        trouble = self._trouble
        is_possible = trouble.tester(self._time())
        rest = frozenset(trouble.scope.elements) - eased
        if is_possible(rest):
            return True
        trouble.conflicts.append(shrink(rest, is_possible, trouble.scope.elements))
        return False

    def _is_cured(self, steps: Mapping[Lever, int]) -> bool:
        """Tell whether some steps are known to cure; where that takes too long to find out they are not."""
        moved = frozenset((lever, step) for lever, step in steps.items() if step)
        if not moved:
            return False
        if moved not in self._tried:
            self._tried[moved] = self._judged(steps)
        answer = self._tried[moved]
        self.leaves_open = self.leaves_open or answer is None
        return answer is not None and answer.is_possible

    def _judged(self, steps: Mapping[Lever, int]) -> Possible | None:
        time = self._time()
        try:
            return time.possible(self._at(steps), max(LEAST_QUESTION_SECONDS, QUESTION_SHARE * time.seconds_left))
        except CutShort:
            time.require_time()
            return None

    def _at(self, steps: Mapping[Lever, int]) -> Instance:
        job = self._trouble.scope.job
        for lever, step in steps.items():
            job = lever.apply(job, step) if step else job
        return self._trouble.scope.instance_of(job)

    def _least_step(self, lever: Lever, steps: Mapping[Lever, int], needed: int) -> int:
        """Find the step that cures while the one before does not; step 0 is known not to, the last one to.

        Arithmetic, and what is `needed` at home, tell from where on it is worth asking a solver.
        """
        time = self._time()
        refused = least_step(lambda step: not time.is_hopeless(self._at({**steps, lever: step})), 0, lever.steps) - 1
        hopeless = max(refused, needed - 1)

        def cures(step: int) -> bool:
            return self._is_cured({**steps, lever: step})

        return least_step(cures, hopeless, lever.steps, self._guess(lever))

    def _known(self, lever: Lever) -> Cure | None:
        """Give the step known to be the least that cures: what the only row of a commitment can have at most.

        Where it cures and may not be the least, it is as good as tried.
        """
        step = self._guess(lever)
        if not step or not self._reached[lever.pointer].cures:
            return None
        figure = self._reached[lever.pointer]
        self._tried.setdefault(frozenset({(lever, step)}), Possible(True, figure.plans))
        return self._cure({lever: step}) if figure.is_most else None

    def _time(self) -> Solving:
        assert self._solving is not None
        return self._solving

    def _guess(self, lever: Lever) -> int | None:
        if lever.pointer not in self._reached:
            return None
        most = self._reached[lever.pointer].attainable + 1e-9
        if float(lever.shown(lever.steps)) > most:
            return None
        return least_step(lambda step: float(lever.shown(step)) <= most, 0, lever.steps)


def least_step(cures: Callable[[int], bool], fails: int, works: int, near: int | None = None) -> int:
    """Find a step that cures while the one before it does not: near a guess, by strides from below, or by halving.

    `fails` is a step that is known not to cure, `works` one that does; strides begin where something is known to fail.
    """
    if near is not None and fails < near < works:
        if cures(near):
            works = near
            if near - 1 == fails or not cures(near - 1):
                return near
            works = near - 1
        else:
            fails = near
    stride = 1 if fails else works
    while fails + stride < works:
        if cures(fails + stride):
            works = fails + stride
            break
        fails, stride = fails + stride, stride * STRIDE
    while works - fails > 1:
        middle = (fails + works) // 2
        fails, works = (fails, middle) if cures(middle) else (middle, works)
    return works
