"""Ways out of a request that cannot be met, for a person to choose from: what each earns, changes, and leaves out."""

import json
import textwrap
from collections.abc import Iterator

from schemas.diagnosis import Diagnosis, Repair
from schemas.job import Lever
from service.demo.page import WIDTH

UNPRICED: dict[Lever, str] = {
    "commitments": "what it costs to deliver less than was promised",
    "targets": "what the energy that is then not left in store would be worth the day after",
    "planned_outages": "what it costs to move or shorten planned work",
    "initial_energy": "what it costs to have more in store at the start",
    "limits": "what the owner of the connection asks for more of it",
}
"""What a lever costs that no margin shows."""


def ways_text(diagnosis: Diagnosis, untroubled: float | None) -> Iterator[str]:
    """Write the repairs in their order, best margin first, beside the best one and the day as it was to be, if known.

    `untroubled` is the margin of the request before the trip.
    """
    what = "what changes, and the patch of the request that does it"
    yield f"{'way':3} {'margin':>9} {'vs best':>9} {'vs no trip':>10}   {what}"
    best = max((repair.margin for repair in diagnosis.repairs), default=0.0)
    for number, repair in enumerate(diagnosis.repairs, 1):
        to_untroubled = "-" if untroubled is None else _signed(repair.margin - untroubled)
        figures = f"{number:3} {repair.margin:9.2f} {_signed(repair.margin - best):>9} {to_untroubled:>10}   "
        first, *more = _wrapped(repair, WIDTH - len(figures))
        yield figures + first
        yield from (" " * len(figures) + line for line in more)


def _signed(amount: float) -> str:
    return f"{amount:+.2f}" if round(amount, 2) else "."


def _wrapped(repair: Repair, width: int) -> list[str]:
    lines = textwrap.wrap(repair.text, width)
    for operation in operations_text(repair):
        lines += textwrap.wrap(operation, width, initial_indent="  ", subsequent_indent="    ")
    return lines


def operations_text(repair: Repair) -> Iterator[str]:
    """Write a patch, an operation a line: what is done, where, and the value as JSON."""
    for operation in repair.patch:
        value = f" {json.dumps(operation['value'])}" if "value" in operation else ""
        yield f"{operation['op']} {operation['path']}{value}"


def margins_text(diagnosis: Diagnosis, currency: str) -> Iterator[str]:
    """Say how exact the margins are, and what they do not hold."""
    least_proven = max(repair.margin_bound - repair.margin for repair in diagnosis.repairs)
    yield (
        f"Margins are {currency}, each of a schedule that was planned and audited for that way, and each proven to "
        f"miss at most {least_proven:.2f} {currency} of the best that can be had with it."
    )
    levers = {change.lever: None for repair in diagnosis.repairs for change in repair.changes}
    yield f"Not in them: {'; '.join(UNPRICED[lever] for lever in levers)}."
