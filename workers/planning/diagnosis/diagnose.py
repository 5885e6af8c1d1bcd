"""The order of work of a diagnosis: where, what, how far, the ways out, and the nearest schedule.

Each step has a share of the time, and what it found stays where time cuts it; the answer then says what is not done.
"""

from collections.abc import Callable, Collection
from dataclasses import dataclass, field

from schemas.diagnosis import Repair
from workers.planning.diagnosis.again import Audited, Planner
from workers.planning.diagnosis.attainable import Reached, is_ceiling, reached
from workers.planning.diagnosis.cures import Cure, cures_of
from workers.planning.diagnosis.feasibility import CutShort, Solving
from workers.planning.diagnosis.localise import Trouble, find_conflicts, search_further, troubles_of
from workers.planning.diagnosis.nearest import Nearest, key_of, nearest
from workers.planning.diagnosis.repairs import repairs_of
from workers.planning.diagnosis.scope import Question
from workers.planning.parts import independent_parts
from workers.planning.rows import HoursRow

SHARES = {"conflicts": 0.4, "more conflicts": 0.25, "attainable": 0.3, "cures": 0.4, "repairs": 0.5, "nearest": 0.9}
"""Share of the time that is left which each step may take, in this order."""

MOST_CONFLICTS = 50
"""Conflicts of one part after which the search for more ends."""


@dataclass
class Findings:
    """What a diagnosis knows so far; `cut_off` says what time did not suffice for."""

    question: Question
    troubles: list[Trouble] = field(default_factory=list)
    reached: list[Reached] = field(default_factory=list)
    cures: list[list[Cure]] = field(default_factory=list)
    repairs: list[Repair] = field(default_factory=list)
    nearest: Nearest | None = None
    no_nearest: str | None = None
    cut_off: list[str] = field(default_factory=list)

    @property
    def is_complete(self) -> bool:
        """Tell whether every conflict is known and nothing was cut off."""
        return not self.cut_off and all(trouble.is_complete for trouble in self.troubles)


def diagnose(question: Question, proven: Collection[tuple[str, ...]], audited: Audited, solving: Solving) -> Findings:
    """Find out why a request cannot be met; `proven` are the parts, by their plants, known not to be possible."""
    found = Findings(question)
    planner = Planner(audited)

    def step(name: str, done: float, work: Callable[[Solving], None]) -> None:
        solving.watch.progress("diagnosing", done)
        try:
            work(solving.until(SHARES[name]))
        except CutShort:
            found.cut_off.append(name)

    step("conflicts", 0.1, lambda s: _find_conflicts(found, proven, s))
    step("more conflicts", 0.2, lambda s: _search_further(found, s))
    step("attainable", 0.3, lambda s: _find_reached(found, s))
    step("cures", 0.4, lambda s: _find_cures(found, s))
    step("repairs", 0.5, lambda s: _find_repairs(found, planner, s))
    step("nearest", 0.7, lambda s: _find_nearest(found, planner, s))
    return found


def _find_conflicts(found: Findings, proven: Collection[tuple[str, ...]], solving: Solving) -> None:
    parts = independent_parts(found.question.instance)
    for trouble in troubles_of(found.question, parts, proven, solving):
        found.troubles.append(trouble)
    for trouble in found.troubles:
        find_conflicts(found.question, trouble, solving)


def _find_reached(found: Findings, solving: Solving) -> None:
    for trouble in found.troubles:
        for one in reached(trouble, solving):
            found.reached.append(one)


def _find_cures(found: Findings, solving: Solving) -> None:
    for trouble in found.troubles:
        cures: list[Cure] = []
        found.cures.append(cures)
        for cure in cures_of(trouble, solving, _guesses(found)):
            cures.append(cure)  # noqa: PERF402


def _find_repairs(found: Findings, planner: Planner, solving: Solving) -> None:
    for repair in repairs_of(found.question, found.cures, planner, solving):
        found.repairs.append(repair)


def _guesses(found: Findings) -> dict[str, float]:
    """Give for each commitment the fewest hours, or the least energy, that any of its rows can have."""
    guesses: dict[str, float] = {}
    for one in found.reached:
        if not is_ceiling(one.row):
            place = f"{one.row.pointer}/{'hours' if isinstance(one.row, HoursRow) else 'energy_mwh'}"
            guesses[place] = min(one.attainable, guesses.get(place, one.attainable))
    return guesses


def _find_nearest(found: Findings, planner: Planner, solving: Solving) -> None:
    found.nearest = nearest(found.question, {key_of(trouble.part) for trouble in found.troubles}, planner, solving)
    if found.nearest is None:
        found.no_nearest = "Outages, needs, floors, limits of a day, run and rest times, ramps and physics leave none."


def _search_further(found: Findings, solving: Solving) -> None:
    for trouble in found.troubles:
        search_further(trouble, solving, MOST_CONFLICTS)
    if not all(trouble.is_complete for trouble in found.troubles):
        raise CutShort("not every conflict is known")
