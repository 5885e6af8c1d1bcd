"""How a solve ended, on two axes: why it stopped, and what is in hand."""

from dataclasses import dataclass
from enum import Enum

import numpy as np
from numpy.typing import NDArray


class Stopped(Enum):
    """Why a solver stopped."""

    WITHIN_GAP = "proven within the gap asked for"
    INFEASIBLE = "proven that nothing is feasible"
    OUT_OF_TIME = "the time limit was reached"
    INTERRUPTED = "it was told to stop"


@dataclass(frozen=True)
class Ending:
    """What a solve left: values of the columns (None without a feasible point), their margin, a proven bound.

    `bound` is an upper bound of the margin; infinite when nothing was proven, minus infinite when infeasible.
    """

    stopped: Stopped
    values: NDArray[np.float64] | None
    margin: float | None
    bound: float
    seconds: float


class SolverError(Exception):
    """A solver answered with a word that has no meaning here, or refused the model."""

    def __init__(self, solver: str, word: str) -> None:
        super().__init__(solver, word)
        self.solver = solver
        self.word = word

    def __str__(self) -> str:
        return f"{self.solver} ended with {self.word}"
