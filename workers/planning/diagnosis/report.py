"""From findings to the document of the contract."""

from collections.abc import Iterable, Iterator

from schemas.assumptions import assumptions
from schemas.cautions import CAUTIONS
from schemas.diagnosis import Attainable, Conflict, Diagnosis, Member, NearestSchedule, Repair, Shortfall
from schemas.schedule import Schedule
from workers.planning.diagnosis.attainable import Reached, unit_of
from workers.planning.diagnosis.diagnose import LEAST, Findings
from workers.planning.diagnosis.elements import Element
from workers.planning.diagnosis.words import summary_of

CUT_OFF = {
    "where": "the search for further parts that cannot be met",
    "conflicts": "the search for the conflicts",
    "attainable": "how far each commitment can be met",
    "cures": "the search for changes that would do",
    LEAST: "whether smaller or other changes would do",
    "repairs": "the planning of every repair",
    "nearest": "the nearest schedule",
    "more conflicts": "the search for further conflicts",
}
MEMBER_OF = {"h": "hours", "MWh": "mwh", "MW h": "mw_hours"}


def diagnosis_of(found: Findings, nearest: NearestSchedule | None, no_nearest: str | None) -> Diagnosis:
    """Write down what was found out."""
    return Diagnosis(
        complete=found.is_complete,
        summary=_summary(found),
        conflicts=list(_conflicts(found)),
        attainable=[_attainable(one) for one in found.reached],
        repairs=_best_first(found.repairs),
        nearest_schedule=nearest,
        no_nearest_schedule=no_nearest,
        cut_off=[CUT_OFF[name] for name in found.cut_off] + _refused(found.refused),
        assumptions=assumptions(found.question.job),
        cautions=list(CAUTIONS),
    )


def nearest_schedule(schedule: Schedule, missing: Iterable[Shortfall]) -> NearestSchedule:
    """Mark a schedule as one that falls short, and list by what."""
    return NearestSchedule(**dict(schedule), shortfalls=list(missing))


def _refused(count: int) -> list[str]:
    """Own up to repairs that are not offered because the audit refused their plan."""
    return [f"{count} repair(s) whose plan the audit refused: a fault of the planner"] if count else []


def _summary(found: Findings) -> str:
    if not any(trouble.conflicts for trouble in found.troubles):
        names = ", ".join(unit.id for trouble in found.troubles for unit in trouble.part.units)
        return f"No schedule of {names or 'this fleet'} meets all that is asked; time did not suffice to say why."
    return summary_of(found.troubles, found.reached)


def _conflicts(found: Findings) -> Iterator[Conflict]:
    """List conflicts with what was promised first, then the facts it meets; without any, all that is asked there."""
    for trouble in found.troubles:
        known = trouble.conflicts or [frozenset(trouble.scope.elements)]
        for conflict in known:
            members = [_member(element) for element in reversed(trouble.scope.elements) if element in conflict]
            yield Conflict(irreducible=bool(trouble.conflicts), members=members)


def _member(element: Element) -> Member:
    return Member(pointer=element.pointer, text=element.text, asset=element.asset, day=element.day)


def _attainable(one: Reached) -> Attainable:
    member = MEMBER_OF[unit_of(one.row)]
    return Attainable(
        commitment=one.row.id,
        asset=one.row.asset,
        day=one.row.day,
        left_out=[element.pointer for element in one.left_out],
        **{f"required_{member}": round(one.required, 9), f"attainable_{member}": round(one.attainable, 9)},
    )


def _best_first(repairs: Iterable[Repair]) -> list[Repair]:
    return sorted(repairs, key=lambda repair: -repair.margin)
