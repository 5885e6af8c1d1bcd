"""The sentence of a diagnosis: what is asked, what can be had, and what stands in the way, with numbers and units."""

from collections.abc import Iterable, Sequence

from workers.planning.diagnosis.attainable import Reached, unit_of
from workers.planning.diagnosis.elements import Element
from workers.planning.diagnosis.localise import Conflict, Trouble
from workers.planning.diagnosis.scope import row_of
from workers.planning.screening import screen

MOST_SENTENCES = 6


def summary_of(troubles: Iterable[Trouble], reached: Sequence[Reached]) -> str:
    """Write a sentence per conflict, the first few of them."""
    sentences: list[str] = []
    for trouble in troubles:
        for conflict in trouble.conflicts:
            sentence = _sentence(trouble, conflict, reached)
            if sentence not in sentences:
                sentences.append(sentence)
    more = len(sentences) - MOST_SENTENCES
    shown = sentences[:MOST_SENTENCES]
    return " ".join([*shown, f"And {more} more."] if more > 0 else shown)


def _sentence(trouble: Trouble, conflict: Conflict, reached: Sequence[Reached]) -> str:
    """Say why a conflict is one: by arithmetic where that shows it, else by what can be had at most."""
    alone = trouble.scope.without(frozenset(trouble.scope.elements) - conflict)
    findings = screen(alone)
    had = _had(conflict, reached)
    if findings:
        return " ".join([findings[0].sentence, *had])
    members = [element for element in trouble.scope.elements if element in conflict][::-1]
    return " ".join([f"{_capital(_listed(members))}: these cannot hold together.", *had])


def _had(conflict: Conflict, reached: Sequence[Reached]) -> list[str]:
    return [
        f"At most {one.attainable:g} of the {one.required:g} {unit_of(one.row)} of {one.row.id}{one.row.where} "
        f"can be had"
        f"{'' if not one.left_out else ', and that only without ' + _listed(one.left_out)}."
        for one in reached
        if row_of(one.row) in conflict and one.attainable < one.required
    ]


def _listed(elements: Sequence[Element]) -> str:
    return "; ".join(element.text for element in elements)


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]
