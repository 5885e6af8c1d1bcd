"""Judge by the oracle alone what a diagnosis says that rows can attain."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import chain, combinations, product
from typing import Any

from schemas.diagnosis import Attainable, Diagnosis
from tests.oracles.elements import Element, elements, out_of_touch
from tests.oracles.leaving_out import amount_due, is_possible_without, most_of
from tests.workers.planning.diagnosis.naming import conflicts_of, names

Document = dict[str, Any]

ROUND_OFF = 1e-4
"""Both sides tolerate this much of a limit, in h, MWh or MW times h."""

STEP = 0.01
"""Energies are given to this, MWh or MW times h; hours are whole intervals."""


def wrong_attainable(document: Document, diagnosis: Diagnosis) -> Iterator[str]:
    """Name figures that are not the oracle's optimum with the rest held, and more left out than is needed."""
    for entry in diagnosis.attainable:
        row = _row_of(document, entry)
        if row is None:
            yield f"attainable {entry.commitment} {entry.asset} {entry.day} is about no binding row"
        else:
            yield from _wrong_figure(document, row, entry)
    listed = {(entry.commitment, entry.asset, entry.day) for entry in diagnosis.attainable}
    for row in set(chain.from_iterable(conflicts_of(diagnosis))):
        if row.steps[0] != "commitments":
            continue
        commitment = document["commitments"][int(row.steps[1])]
        if commitment["kind"] == "hours_at_least" and (commitment["id"], row.asset, row.day) not in listed:
            yield f"nothing says what {names([row])} can attain"


def _row_of(document: Document, entry: Attainable) -> Element | None:
    for row in elements(document):
        if row.steps[0] != "commitments" or (row.asset, row.day) != (entry.asset, entry.day):
            continue
        if document["commitments"][int(row.steps[1])]["id"] == entry.commitment:
            return row
    return None


def _wrong_figure(document: Document, row: Element, entry: Attainable) -> Iterator[str]:
    what = f"attainable {names([row])} without {entry.left_out}"
    commitment = document["commitments"][int(row.steps[1])]
    unit = "hours" if "hours" in commitment else "mw_hours" if commitment["kind"] == "reserve_holding" else "mwh"
    required, figure = getattr(entry, f"required_{unit}"), getattr(entry, f"attainable_{unit}")
    if required is None or figure is None:
        yield f"{what}: no figures in {unit}"
        return
    due = amount_due(document, row)
    if abs(required - due) > ROUND_OFF:
        yield f"{what}: required {required}, asked are {due}"
    # A conflict among assets that nothing links to this row's has no say in what it can attain, named or not.
    elsewhere = out_of_touch(document, row)
    rest = [element for element in elements(document) if element != row]
    choices = [_read_as(pointer, rest) for pointer in entry.left_out]
    if not all(choices):
        yield f"{what}: a pointer names no other element"
        return
    too_much: list[str] = []
    reached: list[float] = []
    for sets in product(*choices):
        left_out = [element for element in dict.fromkeys(chain.from_iterable(sets)) if element not in elsewhere]
        try:
            most = most_of(document, row, [*left_out, *elsewhere])
        except RuntimeError as unsettled:
            print(f"{what}: not judged, {unsettled}")
            return
        if most is None:
            continue
        reached.append(most)
        if _says(commitment, figure, due, most):
            found = list(_smaller_sets(document, row, left_out, elsewhere))
            if not found:
                return
            too_much += found
    yield from too_much[:1] or [
        f"{what}: {figure} {unit} of {due}, the oracle says {reached or 'the rest cannot hold'}"
    ]


def _says(commitment: Document, figure: float, due: float, most: float) -> bool:
    """Tell whether a figure is the oracle's; of an `*_at_most` that can be kept, what is allowed will do, too."""
    close = ROUND_OFF if "hours" in commitment else STEP
    is_met = commitment["kind"].endswith("at_most") and most <= due
    return abs(figure - most) <= close or (is_met and abs(figure - due) <= close)


def _read_as(pointer: str, rest: list[Element]) -> list[tuple[Element, ...]]:
    """Return the sets of elements a pointer may stand for: of a commitment with several rows any of them, or more."""
    named = [element for element in rest if element.pointer == pointer]
    return [some for size in range(len(named), 0, -1) for some in combinations(named, size)]


def _smaller_sets(document: Document, row: Element, left_out: list[Element], elsewhere: list[Element]) -> Iterator[str]:
    """Put every member of what is left out back in: with none of them may the rest hold."""
    for fewer in combinations(left_out, len(left_out) - 1) if left_out else ():
        if is_possible_without(document, [*fewer, *elsewhere, row]):
            yield f"attainable {names([row])} without {names(left_out)}: leaving out {names(fewer)} is enough"
            return
