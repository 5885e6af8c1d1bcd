"""What may be changed to cure a request: one kind of lever a module."""

from collections.abc import Collection, Iterator

from schemas.job import Lever as LeverName
from workers.planning.diagnosis.elements import Element
from workers.planning.diagnosis.levers.commitments import of_commitment
from workers.planning.diagnosis.levers.connections import of_limit
from workers.planning.diagnosis.levers.energy import of_initial_energy, of_target
from workers.planning.diagnosis.levers.lever import Lever
from workers.planning.diagnosis.levers.outages import of_outage
from workers.planning.diagnosis.scope import Scope

OF_ELEMENT = {"target": of_target, "outage": of_outage, "initial": of_initial_energy, "limit": of_limit}
NAMES: dict[str, LeverName] = {
    "row": "commitments",
    "target": "targets",
    "outage": "planned_outages",
    "initial": "initial_energy",
    "limit": "limits",
}


def levers_of(scope: Scope, elements: Collection[Element]) -> list[Lever]:
    """List the levers that the job allows and that ease any of these elements."""
    return [lever for lever in _all(scope, elements) if lever.name in scope.job.levers and lever.steps > 0]


def _all(scope: Scope, elements: Collection[Element]) -> Iterator[Lever]:
    for number in sorted({element.number for element in elements if element.kind == "row"}):
        yield from of_commitment(scope, number)
    for element in elements:
        if element.kind in OF_ELEMENT and NAMES[element.kind] in scope.job.levers:
            yield from OF_ELEMENT[element.kind](scope, element)
