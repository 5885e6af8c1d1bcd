"""Judge a diagnosis by the oracle alone: its conflicts, what rows can attain, its nearest schedule.

Each check yields a sentence for every fault it finds, and nothing where the diagnosis is right. `repair_checks`
and `attainable_checks` judge the rest. Nothing here looks at how the planner came to its answer.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from schemas.diagnosis import Diagnosis, Shortfall
from schemas.schedule import Schedule, Violation
from tests.oracles.conflicts_by_force import conflicts_by_force
from tests.oracles.elements import Element, elements
from tests.oracles.leaving_out import amount_due, is_possible_alone, is_possible_without, most_of
from tests.workers.planning.diagnosis.attainable_checks import wrong_attainable
from tests.workers.planning.diagnosis.naming import conflicts_of, names
from tests.workers.planning.diagnosis.repair_checks import wrong_repairs
from tests.workers.planning.jobs import answer

Document = dict[str, Any]

ROUND_OFF = 1e-4
"""Figures may be rounded, and both sides tolerate this much of a limit, in h, MWh or MW times h."""


def faults_of(document: Document, diagnosis: Diagnosis, *, most_elements: int = 9) -> list[str]:
    """Return what is wrong with a diagnosis of an infeasible job; conflicts of small jobs are found by brute force."""
    if not diagnosis.summary or not diagnosis.cautions:
        return ["no summary or no cautions"]
    return [
        *wrong_conflicts(document, diagnosis),
        *missing_conflicts(document, diagnosis, most_elements),
        *wrong_attainable(document, diagnosis),
        *wrong_repairs(document, diagnosis),
        *wrong_nearest(document, diagnosis),
    ]


def wrong_conflicts(document: Document, diagnosis: Diagnosis) -> Iterator[str]:
    """Name conflicts that are possible alone, or still impossible once a member is left out."""
    known = set(elements(document))
    if not diagnosis.conflicts and is_possible_alone(document, ()):
        yield "no conflict is named"
    for conflict, members in zip(diagnosis.conflicts, conflicts_of(diagnosis), strict=True):
        what = names(members)
        if unknown := members - known:
            yield f"conflict {what}: {names(unknown)} is no element of the job"
            continue
        if len(members) < len(conflict.members):
            yield f"conflict {what} names a member twice"
        if is_possible_alone(document, members):
            yield f"conflict {what} is possible"
            continue
        if not conflict.irreducible:
            if diagnosis.complete:
                yield f"conflict {what} is not irreducible in a complete diagnosis"
            continue
        for member in members:
            if not is_possible_alone(document, members - {member}):
                yield f"conflict {what} is impossible without {names([member])}, too"
    if len(set(conflicts_of(diagnosis))) < len(diagnosis.conflicts):
        yield "a conflict is named twice"


def missing_conflicts(document: Document, diagnosis: Diagnosis, most_elements: int) -> Iterator[str]:
    """Name what brute force finds and a complete diagnosis does not say; tried on jobs of few elements."""
    if not diagnosis.complete or len(elements(document)) > most_elements:
        return
    for members in conflicts_by_force(document) - set(conflicts_of(diagnosis)):
        if members:
            yield f"a complete diagnosis does not name the conflict {names(members)}"


def wrong_nearest(document: Document, diagnosis: Diagnosis) -> Iterator[str]:
    """Name rules a nearest schedule breaks beyond its shortfalls; and one that is missing though there could be one."""
    nearest = diagnosis.nearest_schedule
    if nearest is None:
        yield from _wrongly_none(document, diagnosis)
        return
    known = {(element.pointer, element.asset, element.day) for element in elements(document)}
    for short in nearest.shortfalls:
        if (short.pointer, short.asset, short.day) not in known and (short.pointer, None, None) not in known:
            yield f"shortfall {short.pointer} {short.asset} {short.day} is about no element"
        if not _may_fall_short(short.pointer):
            yield f"shortfall {short.pointer} is about no row, target or limit"
        if short.amount <= 0:
            yield f"shortfall {short.pointer} of {short.amount}"
    decisions = [asset.model_dump(include={"id", "power_mw", "on", "reserve_mw"}) for asset in nearest.assets]
    checked = answer({**document, "task": "check", "schedule": {"assets": decisions}})
    assert isinstance(checked, Schedule)
    violations = checked.verification.violations
    for violation in violations:
        if not any(_explains(short, violation) for short in nearest.shortfalls):
            yield f"nearest schedule: {violation.text} ({violation.pointer}) is in no shortfall"
    for short in nearest.shortfalls:
        if short.amount > ROUND_OFF and not any(_explains(short, violation) for violation in violations):
            yield f"nearest schedule: shortfall {short.pointer} of {short.amount} {short.unit} is none"
    yield from _more_than_needed(document, nearest.shortfalls)


def _may_fall_short(pointer: str) -> bool:
    return pointer.startswith(("/commitments/", "/targets/")) or pointer.endswith(("port_limit_mw",))


def _explains(short: Shortfall, violation: Violation) -> bool:
    return violation.pointer == short.pointer and short.asset in (None, violation.asset)


def _wrongly_none(document: Document, diagnosis: Diagnosis) -> Iterator[str]:
    if not diagnosis.no_nearest_schedule:
        yield "neither a nearest schedule nor a reason why there is none"
    may_fall_short = [element for element in elements(document) if _may_fall_short(element.pointer)]
    if diagnosis.complete and is_possible_without(document, may_fall_short):
        yield f"no nearest schedule ({diagnosis.no_nearest_schedule}), though there is one"


def _more_than_needed(document: Document, shortfalls: list[Shortfall]) -> Iterator[str]:
    """Compare the total, where it is of one unit, with what one row alone would give up for all the rest to hold."""
    total, units = sum(short.amount for short in shortfalls), {short.unit for short in shortfalls}
    for row in elements(document):
        if row.steps[0] != "commitments" or units != {_unit(document, row)}:
            continue
        most = most_of(document, row, ())
        if most is not None and total > abs(amount_due(document, row) - most) + ROUND_OFF:
            yield f"nearest schedule: {total} short in all; {names([row])} alone at {most} would do"


def _unit(document: Document, row: Element) -> str:
    commitment = document["commitments"][int(row.steps[1])]
    return "h" if "hours" in commitment else "MW h" if commitment["kind"] == "reserve_holding" else "MWh"
