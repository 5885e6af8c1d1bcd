"""Replay `hours_at_most`: no more than so many hours with power above a threshold.

    delivered = hours of the row's intervals with power above the threshold, excused ones left out
    met       when delivered at max(0, threshold - headroom) + counted before <= hours

Headroom is part of what is asked, so it makes the row harder to keep: below the threshold, where the other kind goes
above it.
"""

from collections.abc import Iterator, Sequence

from schemas.commitments import HoursAtMost
from schemas.schedule import CommitmentResult
from workers.planning.audit.case import Case
from workers.planning.audit.ledger import figure, pointer
from workers.planning.audit.rows import Row, Target, credits_of, excused_intervals
from workers.planning.audit.thresholds import HOURS_TOLERANCE, THRESHOLD_TOLERANCE_MW, threshold_mw


def replay_hours_at_most(
    case: Case, place: int, commitment: HoursAtMost, target: Target, rows: Sequence[Row]
) -> Iterator[tuple[CommitmentResult, float]]:
    """Yield each row with the price paid for its excess."""
    threshold = threshold_mw(commitment, target)
    asked = max(0.0, threshold - commitment.headroom_mw)
    values = target.power_towards(commitment.direction)
    excused = excused_intervals(case, commitment)
    for row, credit in credits_of(case, commitment, target, rows):
        due = [values[t] for t in row.intervals if t not in excused]
        as_asked = case.clock.hours_of(_above(due, asked)) + credit
        delivered = case.clock.hours_of(_above(due, threshold)) + credit
        excess = as_asked - commitment.hours
        met = excess <= HOURS_TOLERANCE
        case.ledger.checks += 1
        if met:
            _let_thresholds_pass(case, due, asked)
        elif commitment.shortfall_price_per_hour is None:
            _tell_excess(case, place, commitment, target, row, asked, excess)
        result = CommitmentResult(
            id=commitment.id,
            asset=target.asset,
            day=row.day_text,
            required_hours=commitment.hours,
            delivered_hours=delivered,
            met=met,
        )
        yield result, max(0.0, excess) * (commitment.shortfall_price_per_hour or 0.0)


def _above(values: Sequence[float], threshold: float) -> int:
    most = threshold + THRESHOLD_TOLERANCE_MW
    return sum(mw > most for mw in values)


def _let_thresholds_pass(case: Case, values: Sequence[float], asked: float) -> None:
    """Remember how far above the threshold an interval was that did not count all the same."""
    highest = max((mw for mw in values if asked < mw <= asked + THRESHOLD_TOLERANCE_MW), default=asked)
    case.ledger.let_pass(highest - asked)


def _tell_excess(
    case: Case, place: int, commitment: HoursAtMost, target: Target, row: Row, asked: float, excess: float
) -> None:
    verb = "discharges" if commitment.direction == "discharge" else "charges"
    headroom = f" ({figure(commitment.headroom_mw)} MW of headroom kept)" if commitment.headroom_mw else ""
    ran = f"{target.name} {verb} more than {figure(asked)} MW{headroom} for {figure(commitment.hours + excess)} h"
    text = f"{commitment.id}: {ran}{row.when}, {figure(excess)} h above {figure(commitment.hours)} h"
    case.ledger.report("hours_at_most", pointer("commitments", place), excess, "h", text, asset=target.asset)
