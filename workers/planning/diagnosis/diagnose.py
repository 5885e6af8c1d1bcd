"""The order of work of a diagnosis: where, what, how far, the ways out, and the nearest schedule.

Each step has a share of the time, and what it found stays where time cuts it; the answer then says what is not done.
"""

from collections import Counter
from collections.abc import Callable, Collection
from dataclasses import dataclass, field
from math import inf

from schemas.diagnosis import Repair
from workers.planning.diagnosis.again import Audited, Planner, key_of
from workers.planning.diagnosis.attainable import Reached, is_ceiling, reached
from workers.planning.diagnosis.cures import CureSearch, Figure
from workers.planning.diagnosis.feasibility import CutShort, Solving
from workers.planning.diagnosis.localise import Trouble, find_conflicts, search_further, troubles_of
from workers.planning.diagnosis.nearest import Nearest, nearest
from workers.planning.diagnosis.repairs import Joined, place_of, repairs_of
from workers.planning.diagnosis.scope import Question, row_of
from workers.planning.parts import independent_parts
from workers.planning.rows import HoursRow

SHARES = {
    "where": 0.3,
    "conflicts": 0.4,
    "more conflicts": 0.25,
    "attainable": 0.3,
    "cures": 0.4,
    "repairs": 0.5,
    "nearest": 0.9,
}
"""Share of the time that is left which each step may take."""

FIRST_REPAIR = 0.45
"""Progress when a repair has been planned."""

PATIENCE = 5.0
LEAST_PATIENCE_SECONDS = 2.0
"""The search for conflicts beyond the first may take so many times what those took, and so many seconds in any case."""

FIRST_FIGURES = 2.0
FIRST_CURES = 3.0
"""What can be had, and the first change that would do, may take so many times that patience before the first repair;
after it they have another go."""

LEAST = "least"
"""What is cut off where a step of a lever took too long to be judged."""

MOST_CONFLICTS = 50
"""Conflicts of one part after which the search for more ends."""


@dataclass
class Findings:
    """What a diagnosis knows so far.

    `reached` is what commitments can have at most, `had` what they can have and perhaps more. `cut_off` says what time
    did not suffice for, `refused` how many repairs the audit did not pass.
    """

    question: Question
    troubles: list[Trouble] = field(default_factory=list)
    reached: list[Reached] = field(default_factory=list)
    had: list[Reached] = field(default_factory=list)
    searches: list[CureSearch] = field(default_factory=list)
    planned: dict[Joined, Repair | None] = field(default_factory=dict)
    nearest: Nearest | None = None
    no_nearest: str | None = None
    cut_off: list[str] = field(default_factory=list)
    refused: int = 0

    @property
    def repairs(self) -> list[Repair]:
        """What was planned and has a schedule."""
        return [repair for repair in self.planned.values() if repair is not None]

    @property
    def is_complete(self) -> bool:
        """Tell whether every conflict is known and nothing was cut off."""
        return not self.cut_off and all(trouble.is_complete for trouble in self.troubles)


def diagnose(question: Question, proven: Collection[tuple[str, ...]], audited: Audited, solving: Solving) -> Findings:
    """Find out why a request cannot be met; `proven` are the parts, by their plants, known not to be possible."""
    found = Findings(question)
    planner = Planner(audited)

    def step(name: str, done: float, work: Callable[[Solving], None], most: float = inf) -> float:
        began = solving.limits.clock()
        solving.watch.progress("diagnosing", done)
        found.cut_off = [other for other in found.cut_off if other != name]
        try:
            work(solving.until(SHARES[name], most))
        except CutShort:
            found.cut_off.append(name)
        return solving.limits.clock() - began

    first = step("where", 0.05, lambda s: _find_parts(found, proven, s))
    first += step("conflicts", 0.1, lambda s: _find_conflicts(found, s))
    patience = max(LEAST_PATIENCE_SECONDS, PATIENCE * first)
    step("attainable", 0.2, lambda s: _find_reached(found, s), FIRST_FIGURES * patience)
    step("cures", 0.3, lambda s: _find_cures(found, s, 1), FIRST_CURES * patience)
    step("repairs", 0.4, lambda s: _find_repairs(found, planner, s, FIRST_REPAIR))
    step("more conflicts", 0.5, lambda s: _search_further(found, s), patience)
    step("attainable", 0.6, lambda s: _find_reached(found, s))
    step("cures", 0.7, lambda s: _find_cures(found, s, None))
    step("repairs", 0.8, lambda s: _find_repairs(found, planner, s, 0.85))
    step("nearest", 0.9, lambda s: _find_nearest(found, planner, s))
    found.refused = planner.refused
    return found


def _find_parts(found: Findings, proven: Collection[tuple[str, ...]], solving: Solving) -> None:
    parts = independent_parts(found.question.instance)
    for trouble in troubles_of(found.question, parts, proven, solving):
        found.troubles.append(trouble)


def _find_conflicts(found: Findings, solving: Solving) -> None:
    for trouble in found.troubles:
        find_conflicts(found.question, trouble, solving)


def _find_reached(found: Findings, solving: Solving) -> None:
    found.had = []
    for trouble in found.troubles:
        for one in reached(trouble, {row_of(one.row) for one in found.reached}, solving):
            (found.reached if one.is_proven else found.had).append(one)
    if found.had:
        raise CutShort("what can be had is not known to be the most")


def _find_cures(found: Findings, solving: Solving, most: int | None) -> None:
    if not found.searches:
        found.searches = [CureSearch(trouble) for trouble in found.troubles]
    for search, trouble in zip(found.searches, found.troubles, strict=True):
        search.learn(_reached_by_lever(found, trouble))
    for search in found.searches:
        search.go_on(solving, most)
    if LEAST not in found.cut_off and any(search.leaves_open for search in found.searches):
        found.cut_off.append(LEAST)


def _reached_by_lever(found: Findings, trouble: Trouble) -> dict[str, Figure]:
    """Give for each commitment the fewest hours, or the least energy, that any of its rows can have.

    Asking for no more hours cures where it is the only row of its commitment and nothing had to be left out for it.
    """
    rows = Counter(row.commitment for row in trouble.scope.instance.rows)
    figures: dict[str, Figure] = {}
    for one in (*found.reached, *found.had):
        if is_ceiling(one.row):
            continue
        is_hours = isinstance(one.row, HoursRow)
        place = f"{one.row.pointer}/{'hours' if is_hours else 'energy_mwh'}"
        cures = is_hours and rows[one.row.commitment] == 1 and not one.left_out
        if place not in figures or one.attainable < figures[place].attainable:
            figures[place] = Figure(one.attainable, one.is_proven, cures, one.plans)
    return figures


def _find_repairs(found: Findings, planner: Planner, solving: Solving, done: float) -> None:
    cures = [search.cures for search in found.searches]
    for joined, repair in repairs_of(found.question, cures, planner, solving, found.planned):
        found.planned[joined] = repair
        if repair is not None:
            solving.watch.progress("diagnosing", done)
    known = {place_of(move) for search in found.searches for cure in search.cures for move in cure.moves}
    found.planned = {joined: repair for joined, repair in found.planned.items() if joined <= known}


def _find_nearest(found: Findings, planner: Planner, solving: Solving) -> None:
    found.nearest = nearest(found.question, {key_of(trouble.part) for trouble in found.troubles}, planner, solving)
    if found.nearest is None:
        found.no_nearest = "Outages, needs, floors, limits of a day, run and rest times, ramps and physics leave none."


def _search_further(found: Findings, solving: Solving) -> None:
    for trouble in found.troubles:
        search_further(trouble, solving, MOST_CONFLICTS)
    if not all(trouble.is_complete for trouble in found.troubles):
        raise CutShort("not every conflict is known")
