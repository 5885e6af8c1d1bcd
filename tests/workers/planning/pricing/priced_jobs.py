"""Jobs to price, and an oracle of their margins that shares nothing with the planner."""

from collections.abc import Iterator
from typing import Any

from schemas.schedule import CommitmentCost, Schedule
from tests.oracles.formulation import Answer, formulate, solve
from tests.oracles.formulation_clock import read_clock
from tests.oracles.random_mixed import mixed_request
from tests.workers.planning.jobs import answer, hours, job, store
from workers.planning.limits import Limits, Unwatched

Document = dict[str, Any]

GAP = 1e-6
ORACLE_SECONDS = 120.0
SMALL_DAY = [10.0, 10.0, 20.0, 50.0, 40.0, 30.0]
"""Prices of tests/reference/storage_small.json."""


class LateAfter(Unwatched):
    """A watch whose clock jumps past the time for solving, out of ten seconds, once a phase is reported."""

    def __init__(self, phase: str) -> None:
        self._phase = phase
        self._now = 0.0

    def progress(self, phase: str, done: float) -> None:  # noqa: ARG002
        """Jump at the phase."""
        if phase == self._phase:
            self._now = 9.2

    def limits(self) -> Limits:
        """Give ten seconds on the watch's clock."""
        return Limits(10.0, 1, 0.0, clock=lambda: self._now)


def explained(document: Document) -> Schedule:
    """Plan a document with every row of its commitments priced."""
    found = answer(document | {"explain_commitments": True})
    assert isinstance(found, Schedule), found
    assert found.verification.violations == []
    return found


def costs_asked(document: Document, step: float = 1.0, commitment: str = "evening") -> Document:
    """Ask what each step of a commitment costs."""
    return document | {"task": "commitment_costs", "commitment": commitment, "step_hours": step}


def costs(document: Document, step: float = 1.0, commitment: str = "evening") -> list[CommitmentCost]:
    """Give the entries of an answer, whether the job itself can be met or not."""
    found = answer(costs_asked(document, step, commitment))
    assert found.commitment_costs is not None
    return list(found.commitment_costs)


def small(needed: float, **members: Any) -> Document:
    """Return the small store of the references with hours at half its power."""
    return job(SMALL_DAY, store(), commitments=[hours({"assets": ["quay-b1"]}, needed, 0.5)], **members)


def margin_without(document: Document, row: tuple[int, str | None, str | None]) -> tuple[float, float]:
    """Give margin and bound by the oracle with a row left out."""
    program, _ = formulate(document, read_clock(document["window"]), without_rows={row})
    found = program.solve(GAP, ORACLE_SECONDS)
    assert found.value is not None
    assert found.bound is not None
    return found.value, found.bound


def with_hours(document: Document, number: int, needed: float) -> Answer:
    """Solve by the oracle with a commitment of so many hours."""
    promised = [dict(commitment) for commitment in document["commitments"]]
    promised[number]["hours"] = needed
    return solve(document | {"commitments": promised}, gap=GAP, time_limit=ORACLE_SECONDS)


def mixed_with_commitments(first: int) -> Iterator[tuple[int, Document]]:
    """Yield random requests with commitments, from a seed on."""
    seed = first
    while True:
        document = mixed_request(seed, assets=2, intervals=5) | {"relative_gap": GAP}
        if document.get("commitments"):
            yield seed, document
        seed += 1


def with_hours_at_least(first: int) -> Iterator[tuple[int, Document, int]]:
    """Yield random requests with a commitment of at least so many hours, and its number."""
    for seed, document in mixed_with_commitments(first):
        for number, commitment in enumerate(document["commitments"]):
            if commitment["kind"] == "hours_at_least":
                yield seed, document, number
                break
