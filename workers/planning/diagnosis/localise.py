"""Where it fails: the smallest parts of a request that cannot be met, and the conflicts in them.

Each asset alone, then each site, then what is tied beyond sites: conflicts found in a small scope stand in every larger
one, so the larger ones are searched for others only.
"""

from collections.abc import Callable, Collection, Iterable, Iterator
from dataclasses import dataclass, field

from workers.planning.diagnosis.elements import Element
from workers.planning.diagnosis.enumeration import Enumeration, independent_conflicts
from workers.planning.diagnosis.feasibility import CutShort, Solving
from workers.planning.diagnosis.scope import Question, Scope, scope_of_asset, scope_of_part, scope_of_site
from workers.planning.instance import Instance

Conflict = frozenset[Element]


@dataclass
class Trouble:
    """An independent part that cannot be met: its scope, what is known to be in conflict there, and what was tried.

    `homes` are the smaller scopes in which conflicts were found; `is_complete` when every conflict is known.
    """

    scope: Scope
    part: Instance
    conflicts: list[Conflict] = field(default_factory=list)
    homes: dict[Conflict, Scope] = field(default_factory=dict)
    is_complete: bool = False
    tried: dict[frozenset[Element], bool] = field(default_factory=dict)

    def tester(self, solving: Solving, scope: Scope | None = None) -> Callable[[frozenset[Element]], bool]:
        """Give the question whether some elements can hold together in the scope, all others left out."""
        scope = self.scope if scope is None else scope
        tried = self.tried if scope is self.scope else {}
        everything = frozenset(scope.elements)

        def is_possible(kept: frozenset[Element]) -> bool:
            if kept not in tried:
                tried[kept] = solving.is_possible(scope.without(everything - kept))
            return tried[kept]

        return is_possible

    def guesser(self, solving: Solving, scope: Scope | None = None) -> Callable[[frozenset[Element]], bool]:
        """Give the same question, answered from what was found for larger and smaller sets where that is known.

        Leaving out an outage lets ramps bind again, so a part of what is possible need not be: what comes of this is to
        be tested once more.
        """
        is_possible = self.tester(solving, scope)
        known: dict[frozenset[Element], bool] = {}

        def is_likely(kept: frozenset[Element]) -> bool:
            for other, possible in known.items():
                if (kept <= other) if possible else (kept >= other):
                    return possible
            known[kept] = is_possible(kept)
            return known[kept]

        return is_likely


def troubles_of(
    question: Question, parts: Iterable[Instance], proven: Collection[tuple[str, ...]], solving: Solving
) -> Iterator[Trouble]:
    """Give each independent part that cannot be met; `proven` are those, by the ids of their plants, where it is known.

    Those come first. Raises CutShort.
    """
    for part in sorted(parts, key=lambda part: tuple(unit.id for unit in part.units) not in proven):
        trouble = Trouble(scope_of_part(question, part), part)
        everything = frozenset(trouble.scope.elements)
        if tuple(unit.id for unit in part.units) in proven:
            trouble.tried[everything] = False
        if not trouble.tester(solving)(everything):
            yield trouble


def find_conflicts(question: Question, trouble: Trouble, solving: Solving) -> None:
    """Find conflicts of a part that share nothing, the smallest scopes first; raises CutShort."""
    for scope in (*_smaller(question, trouble.part), trouble.scope):
        is_possible, is_likely = trouble.tester(solving, scope), trouble.guesser(solving, scope)
        for conflict in independent_conflicts(scope.elements, is_possible, trouble.conflicts, is_likely):
            trouble.conflicts.append(conflict)
            if scope is not trouble.scope:
                trouble.homes[conflict] = scope


def _smaller(question: Question, part: Instance) -> Iterator[Scope]:
    """Cut a part into its assets, then its sites, where these are smaller than it."""
    if len(part.units) < 2:
        return
    yield from (scope_of_asset(question, part, unit.id) for unit in part.units)
    if len(part.meters) > 1 and question.job.fleet is not None:
        sites = {site.id for site in question.job.fleet.sites}
        yield from (
            scope_of_site(question, part, meter.id)
            for meter in part.meters
            if meter.id in sites and len(meter.units) > 1
        )


def search_further(trouble: Trouble, solving: Solving, most: int) -> None:
    """Find the conflicts that share members with known ones, until all or `most` are known, or time runs out."""
    search = Enumeration(trouble.scope.elements, trouble.tester(solving), trouble.conflicts)
    try:
        for _ in search.steps():
            if len(search.conflicts) >= most:
                break
    except CutShort:
        pass
    trouble.conflicts = search.conflicts
    trouble.is_complete = search.is_complete
