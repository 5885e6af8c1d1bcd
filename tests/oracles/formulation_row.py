"""Hold one row of a commitment: one target over some intervals."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from tests.oracles.formulation_clock import Clock, given
from tests.oracles.formulation_program import Affine

RowKey = tuple[int, str | None, str | None]
"""A row by the number of its commitment in the job, its asset and its day; None where it has none of its own."""


@dataclass(frozen=True)
class Row:
    """Hold what a row needs.

    `power` and `reserve` cover the whole window, MW; `power` is positive in the commitment's direction, `reserve` is
    what the subject holds of the commitment's product. `asset` and `day` are None where the row is not about one alone.
    `credit` is what was counted before, in the commitment's unit.
    """

    commitment: dict[str, Any]
    asset: str | None
    day: str | None
    clock: Clock
    intervals: list[int]
    power: list[Affine]
    reserve: list[Affine]
    rated_mw: float
    excused: set[int]
    credit: float

    @property
    def threshold_mw(self) -> float:
        """Return the threshold, without headroom."""
        threshold = self.commitment["threshold"]
        mw = given(threshold, "mw")
        return float(threshold["fraction_of_rated"] * self.rated_mw if mw is None else mw)

    @property
    def headroom_mw(self) -> float:
        """Return by how much plan and proof are to keep clear of the threshold."""
        return float(given(self.commitment, "headroom_mw", 0.0))
