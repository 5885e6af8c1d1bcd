"""Plan a fleet as one mixed-integer program, written from the contract alone.

It reads the job document as a caller sends it, `fleet` and `window` inline, and shares no code with the planner: not
its models, not its day, outage or unit arithmetic. Plain rather than fast; meant for small jobs. It takes a job to be
valid. Supported: every kind of asset and commitment, reserve products and lots; of the tasks `schedule` alone.
"""

from __future__ import annotations

from collections.abc import Set
from dataclasses import dataclass, field
from typing import Any, Literal

from tests.oracles.formulation_clock import Clock, Job, read_clock
from tests.oracles.formulation_commitments import add_commitments
from tests.oracles.formulation_generator import add_generator
from tests.oracles.formulation_meters import Powers, add_meters
from tests.oracles.formulation_passive import add_flexible_load, add_renewable, fixed_load
from tests.oracles.formulation_program import Affine, Program, Solution
from tests.oracles.formulation_row import RowKey
from tests.oracles.formulation_storage import Power, add_storage

Outcome = Literal["optimal", "feasible", "infeasible", "undecided"]


@dataclass(frozen=True)
class Answer:
    """Hold what the oracle found.

    `outcome` is `feasible` or `undecided` where time ran out; `margin` and `bound` (an upper one) are in the window's
    currency, None without a schedule, and with costs squared too the true margin of the schedule and a true bound;
    `powers` are MW at the terminals per asset and interval, positive = into the grid; `on` is given for generators,
    `reserves` (MW per product and interval) for assets that may hold any.
    """

    outcome: Outcome
    margin: float | None = None
    bound: float | None = None
    powers: dict[str, list[float]] = field(default_factory=dict)
    on: dict[str, list[bool]] = field(default_factory=dict)
    reserves: dict[str, dict[str, list[float]]] = field(default_factory=dict)


def solve(job: Job, *, gap: float = 1e-6, time_limit: float = 60.0) -> Answer:
    """Return the best schedule of a valid job, to the relative `gap`, within `time_limit` seconds.

    Raises ValueError for what this oracle does not support, RuntimeError where the solver ends in another way.
    """
    clock = read_clock(job["window"])
    program, powers = formulate(job, clock)
    solution = program.solve(gap, time_limit)
    if solution.status == 2:
        return Answer("infeasible")
    if solution.status not in (0, 1):
        raise RuntimeError("the solver ended with status", solution.status)
    if solution.columns is None:
        return Answer("undecided")
    outcome: Outcome = "optimal" if solution.status == 0 else "feasible"
    return _answer(outcome, solution, powers)


def formulate(
    job: Job, clock: Clock, *, without_rows: Set[RowKey] = frozenset(), free_energies: Set[str] = frozenset()
) -> tuple[Program, Powers]:
    """Return the program of a job and the power of each asset in it.

    What no edit of a document can express: `without_rows` are not asked, and the stores in `free_energies` may start
    with any energy from `min_stored_mwh` to their ceiling; they need a `final_stored_mwh` of their own in the job.
    """
    program = Program()
    powers = {
        asset["id"]: _add_asset(program, job, asset, clock, asset["id"] in free_energies)
        for asset in job["fleet"]["assets"]
    }
    add_meters(program, job, powers, clock)
    add_commitments(program, job, powers, clock, without_rows)
    return program, powers


def _add_asset(program: Program, job: Job, asset: dict[str, Any], clock: Clock, has_free_energy: bool) -> Power:
    if asset["kind"] == "fixed_load":
        return fixed_load(job, asset, clock)
    if asset["kind"] == "storage":
        return add_storage(program, job, asset, clock, has_free_energy=has_free_energy)
    add = {
        "generator": add_generator,
        "renewable": add_renewable,
        "flexible_load": add_flexible_load,
    }.get(asset["kind"])
    if add is None:
        raise ValueError(f"this oracle does not know {asset['kind']}")
    return add(program, job, asset, clock)


def _answer(outcome: Outcome, solution: Solution, powers: Powers) -> Answer:
    def values(expressions: list[Affine]) -> list[float]:
        return [expression.at(solution.columns) for expression in expressions]

    return Answer(
        outcome,
        solution.value,
        solution.bound,
        {key: values(power.net) for key, power in powers.items()},
        {key: [v > 0.5 for v in values(power.on)] for key, power in powers.items() if power.on is not None},
        {
            key: {product: values(held) for product, held in power.reserve.held.items()}
            for key, power in powers.items()
            if power.reserve.held
        },
    )
