"""Read the members of conflicts as elements, and name elements so that a person can find them."""

from __future__ import annotations

from collections.abc import Iterable

from schemas.diagnosis import Diagnosis
from tests.oracles.elements import Element


def conflicts_of(diagnosis: Diagnosis) -> list[frozenset[Element]]:
    """Return the conflicts as sets of elements; only rows are told apart by asset and day."""
    return [
        frozenset(
            Element(m.pointer, m.asset, m.day) if m.pointer.startswith("/commitments/") else Element(m.pointer)
            for m in conflict.members
        )
        for conflict in diagnosis.conflicts
    ]


def names(members: Iterable[Element]) -> str:
    """Write elements in one line."""
    return ", ".join(sorted(" ".join(filter(None, (e.pointer, e.asset, e.day))) for e in members)) or "of nothing"
