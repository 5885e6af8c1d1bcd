"""Replay `reserve_holding`: at least so much reserve of a product held in each interval of the row.

    held[t] >= due[t], summed over the assets behind a group, a site or the fleet
    required = sum of h * due[t];  delivered = sum of h * min(due[t], held[t]) + counted before

The same MW counts in each commitment that covers it. What was counted before is part of the figure only.
"""

from collections.abc import Iterator, Mapping, Sequence
from functools import partial
from math import fsum

from schemas.commitments import ReserveHolding
from schemas.schedule import CommitmentResult
from workers.planning.audit.case import Case
from workers.planning.audit.clock import whole_series
from workers.planning.audit.due import are_all_met, due_in, missing_mw, report_missing
from workers.planning.audit.ledger import at, figure, pointer
from workers.planning.audit.reserve import Held
from workers.planning.audit.reserve_market import total_mw
from workers.planning.audit.rows import Row, Target, credits_of


def replay_reserve_holding(
    case: Case,
    place: int,
    commitment: ReserveHolding,
    target: Target,
    rows: Sequence[Row],
    held: Mapping[str, Held],
) -> Iterator[tuple[CommitmentResult, float]]:
    """Yield each row with the price paid for what is not held; raise ValueError where there is no such product."""
    if commitment.product not in case.offers:
        raise ValueError(f"commitment {commitment.id} is for {commitment.product}, which is no product of the window")
    due = whole_series(commitment.power_mw, case.clock.count, f"power_mw of {commitment.id}")
    behind = [held[asset.id] for asset in target.members]
    values = total_mw([reserve[commitment.product] for reserve in behind if commitment.product in reserve])
    values = [0.0] * case.clock.count if values is None else values
    hours = case.clock.hours
    for row, credit in credits_of(case, commitment, target, rows):
        asked = due_in(row, due, ())
        missing = missing_mw(values, due, asked)
        met = are_all_met(case, asked, missing)
        if not met and commitment.shortfall_price_per_mw_per_hour is None:
            report_missing(missing, partial(_tell, case, place, commitment, target, due))
        result = CommitmentResult(
            id=commitment.id,
            asset=target.asset,
            day=row.day_text,
            required_mw_hours=hours * fsum(due[t] for t in asked),
            delivered_mw_hours=hours * fsum(min(due[t], values[t]) for t in asked) + credit,
            met=met,
        )
        yield result, hours * fsum(missing.values()) * (commitment.shortfall_price_per_mw_per_hour or 0.0)


def _tell(
    case: Case,
    place: int,
    commitment: ReserveHolding,
    target: Target,
    due: Sequence[float],
    t: int,
    missing: float,
) -> None:
    holding = f"{target.name} holds {figure(due[t] - missing)} MW of {commitment.product}"
    text = f"{commitment.id}: {holding} from {at(case.clock.starts[t])}, {figure(missing)} MW short of {figure(due[t])}"
    where = pointer("commitments", place)
    case.ledger.report("reserve_holding", where, missing, "MW", text, asset=target.asset, interval=t)
