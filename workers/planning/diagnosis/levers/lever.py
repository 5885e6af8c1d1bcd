"""One thing that may be changed to cure a request: by how much, in what the caller wrote, and in words.

A lever has steps: 0 is the request as it is, each further one asks for less (or grants more) by what a person would
write: one interval, 0.01 MW, 0.01 MWh, 0.01 of a fraction. A step is a change of a job, and the same change as values
at pointers of the request.
"""

from collections.abc import Callable
from dataclasses import dataclass
from math import ceil, floor
from typing import Any

from schemas.job import Lever as LeverName
from schemas.job import ScheduleJob
from workers.planning.diagnosis.elements import Element

GRAIN = 0.01
"""Step of powers, energies and fractions: MW, MWh, share."""

MOST_STEPS = 10**9

Values = dict[str, Any]
"""Values by pointer into the request; None takes a member away."""


@dataclass(frozen=True)
class Lever:
    """One thing that can be moved; `steps` of it there are.

    `covers` are the elements it eases; `apply` changes a job of the scope to a step, `values` are the same change to
    the request, `shown` what stands there, in `unit`, `words` says it. `pointer` is where.
    """

    name: LeverName
    pointer: str
    unit: str
    steps: int
    covers: frozenset[Element]
    apply: Callable[[ScheduleJob, int], ScheduleJob]
    values: Callable[[int], Values]
    shown: Callable[[int], float | str]
    words: Callable[[int], str]


@dataclass(frozen=True)
class Grid:
    """A number that moves from `now` towards `end` over the multiples of `step`; rounded outwards, never beyond."""

    now: float
    end: float
    step: float = GRAIN

    @property
    def steps(self) -> int:
        """Number of steps until the end is reached."""
        if self.end < self.now:
            return max(0, ceil(self.now / self.step - 1e-9) - floor(self.end / self.step + 1e-9))
        return max(0, min(MOST_STEPS, ceil(self.end / self.step - 1e-9) - floor(self.now / self.step + 1e-9)))

    def at(self, steps: int) -> float:
        """Give the number after so many steps; as it is after none."""
        if steps == 0:
            return self.now
        if self.end < self.now:
            return max(self.end, round((ceil(self.now / self.step - 1e-9) - steps) * self.step, 9))
        return min(self.end, round((floor(self.now / self.step + 1e-9) + steps) * self.step, 9))
