"""Plan a fleet of stores and fixed loads as one mixed-integer program, written from the contract alone.

It reads the job document as a caller sends it, `fleet` and `window` inline, and shares no code with the planner: not
its models, not its day, outage or unit arithmetic. Plain rather than fast; meant for small jobs. It takes a job to be
valid. Supported: kinds `storage` and `fixed_load`, commitments `hours_at_least`, everything the contract says of them.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Literal

from tests.oracles.formulation_clock import Clock, Job, fractions, given, read_clock, series
from tests.oracles.formulation_commitments import add_commitments
from tests.oracles.formulation_meters import Powers, add_meters
from tests.oracles.formulation_program import Affine, Program
from tests.oracles.formulation_storage import Power, add_storage

Outcome = Literal["optimal", "feasible", "infeasible", "undecided"]


@dataclass(frozen=True)
class Answer:
    """Hold what the oracle found.

    `outcome` is `feasible` or `undecided` where time ran out; `margin` and `bound` (an upper one) are in the window's
    currency, None without a schedule; `powers` are MW at the terminals per asset and interval, positive = into the
    grid.
    """

    outcome: Outcome
    margin: float | None = None
    bound: float | None = None
    powers: dict[str, list[float]] = field(default_factory=dict)


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
    found = {
        asset_id: [_value_of(expression, solution.columns) for expression in power.net]
        for asset_id, power in powers.items()
    }
    return Answer("optimal" if solution.status == 0 else "feasible", solution.value, solution.bound, found)


def formulate(job: Job, clock: Clock) -> tuple[Program, Powers]:
    """Return the program of a job and the power of each asset in it."""
    if given(job["fleet"], "lot_mw") or any(given(site, "lot_mw") for site in given(job["fleet"], "sites", [])):
        raise ValueError("this oracle does not know lots")
    program, powers = Program(), {}
    for asset in job["fleet"]["assets"]:
        if asset["kind"] == "storage":
            powers[asset["id"]] = add_storage(program, job, asset, clock)
        elif asset["kind"] == "fixed_load":
            powers[asset["id"]] = _fixed_load(job, asset, clock)
        else:
            raise ValueError(f"this oracle does not know {asset['kind']}")
    add_meters(program, job, powers, clock)
    add_commitments(program, job, powers, clock)
    return program, powers


def _fixed_load(job: Job, asset: dict[str, Any], clock: Clock) -> Power:
    """Return a load that draws its forecast, scaled by what outages leave of it."""
    drawn = series(job["forecasts"][asset["id"]], len(clock))
    left = fractions(job, clock, asset["id"], "charge")
    return Power([Affine({}, -mw * fraction) for mw, fraction in zip(drawn, left, strict=True)], 0.0)


def _value_of(expression: Affine, columns: Any) -> float:
    return expression.constant + sum(a * float(columns[c]) for c, a in expression.terms.items())
