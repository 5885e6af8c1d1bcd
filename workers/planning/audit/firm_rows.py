"""Replay `firm_delivery`: at least so much power in each interval of the row that is not excused.

    power[t] >= due[t] wherever due[t] > 0
    required = sum of h * due[t];  delivered = sum of h * min(due[t], max(power[t], 0)) + counted before

What was counted before is part of the figure only: power that is missing now is not made up for by power then.
"""

from collections.abc import Iterator, Sequence
from functools import partial
from math import fsum

from schemas.commitments import FirmDelivery
from schemas.schedule import CommitmentResult
from workers.planning.audit.case import Case
from workers.planning.audit.clock import whole_series
from workers.planning.audit.due import are_all_met, due_in, missing_mw, report_missing
from workers.planning.audit.ledger import at, figure, pointer
from workers.planning.audit.rows import Row, Target, credits_of, excused_intervals


def replay_firm_delivery(
    case: Case, place: int, commitment: FirmDelivery, target: Target, rows: Sequence[Row]
) -> Iterator[tuple[CommitmentResult, float]]:
    """Yield each row with the price paid for the energy that is missing."""
    due = whole_series(commitment.power_mw, case.clock.count, f"power_mw of {commitment.id}")
    values = target.power_towards(commitment.direction)
    excused = excused_intervals(case, commitment)
    hours = case.clock.hours
    for row, credit in credits_of(case, commitment, target, rows):
        asked = due_in(row, due, excused)
        missing = missing_mw(values, due, asked)
        met = are_all_met(case, asked, missing)
        if not met and commitment.shortfall_price_per_mwh is None:
            report_missing(missing, partial(_tell, case, place, commitment, target, due))
        result = CommitmentResult(
            id=commitment.id,
            asset=target.asset,
            day=row.day_text,
            required_mwh=hours * fsum(due[t] for t in asked),
            delivered_mwh=hours * fsum(min(due[t], max(values[t], 0.0)) for t in asked) + credit,
            met=met,
        )
        yield result, hours * fsum(missing.values()) * (commitment.shortfall_price_per_mwh or 0.0)


def _tell(
    case: Case,
    place: int,
    commitment: FirmDelivery,
    target: Target,
    due: Sequence[float],
    t: int,
    missing: float,
) -> None:
    verb = "discharges" if commitment.direction == "discharge" else "charges"
    running = f"{target.name} {verb} {figure(due[t] - missing)} MW from {at(case.clock.starts[t])}"
    text = f"{commitment.id}: {running}, {figure(missing)} MW short of the {figure(due[t])} MW due"
    where = pointer("commitments", place)
    case.ledger.report("firm_delivery", where, missing, "MW", text, asset=target.asset, interval=t)
