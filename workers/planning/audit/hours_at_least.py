"""Replay `hours_at_least`: so many hours with power at or above a threshold.

delivered = hours of the row's intervals with power at or above the threshold, or excused, in blocks long enough
met       when delivered at (threshold + headroom) + counted before >= hours
"""

from collections.abc import Iterator, Sequence

from schemas.commitments import HoursAtLeast
from schemas.schedule import CommitmentResult
from workers.planning.audit.case import Case
from workers.planning.audit.ledger import figure, pointer
from workers.planning.audit.rows import Row, Target, credits_of, excused_intervals
from workers.planning.audit.thresholds import HOURS_TOLERANCE, THRESHOLD_TOLERANCE_MW, threshold_mw


def replay_hours_at_least(
    case: Case, place: int, commitment: HoursAtLeast, target: Target, rows: Sequence[Row]
) -> Iterator[tuple[CommitmentResult, float]]:
    """Yield each row with the price paid for its shortfall."""
    threshold = threshold_mw(commitment, target)
    asked = threshold + commitment.headroom_mw
    values = target.power_towards(commitment.direction)
    excused = excused_intervals(case, commitment)
    counts_as_asked = _counting(values, asked, excused)
    counts = counts_as_asked if asked == threshold else _counting(values, threshold, excused)
    shortest = round(commitment.min_block_hours / case.clock.hours)
    for row, credit in credits_of(case, commitment, target, rows):
        as_asked = case.clock.hours_of(counted(row.intervals, counts_as_asked, shortest)) + credit
        delivered = case.clock.hours_of(counted(row.intervals, counts, shortest)) + credit
        short = commitment.hours - as_asked
        met = short <= HOURS_TOLERANCE
        case.ledger.checks += 1
        if met:
            _let_thresholds_pass(case, values, asked, row)
        elif commitment.shortfall_price_per_hour is None:
            _tell_short(case, place, commitment, target, row, asked, short)
        result = CommitmentResult(
            id=commitment.id,
            asset=target.asset,
            day=row.day_text,
            required_hours=commitment.hours,
            delivered_hours=delivered,
            met=met,
        )
        yield result, max(0.0, short) * (commitment.shortfall_price_per_hour or 0.0)


def _counting(values: Sequence[float], threshold: float, excused: set[int]) -> list[bool]:
    least = threshold - THRESHOLD_TOLERANCE_MW
    counts = [mw >= least for mw in values]
    for t in excused:
        counts[t] = True
    return counts


def counted(intervals: Sequence[int], counts: Sequence[bool], shortest: int) -> int:
    """Return how many of a row's intervals count; unbroken stretches shorter than `shortest` do not."""
    if shortest <= 1:
        return sum(counts[t] for t in intervals)
    total = length = 0
    previous = -2
    for t in intervals:
        if not counts[t]:
            continue
        if t != previous + 1:
            total += length if length >= shortest else 0
            length = 0
        length += 1
        previous = t
    return total + (length if length >= shortest else 0)


def _let_thresholds_pass(case: Case, values: Sequence[float], asked: float, row: Row) -> None:
    """Remember how far below the threshold an interval was that counted all the same."""
    nearest = min(
        (values[t] for t in row.intervals if asked - THRESHOLD_TOLERANCE_MW <= values[t] < asked), default=asked
    )
    case.ledger.let_pass(asked - nearest)


def _tell_short(
    case: Case, place: int, commitment: HoursAtLeast, target: Target, row: Row, asked: float, short: float
) -> None:
    verb = "discharges" if commitment.direction == "discharge" else "charges"
    headroom = f" ({figure(commitment.headroom_mw)} MW of it headroom)" if commitment.headroom_mw else ""
    blocks = f" in blocks of at least {figure(commitment.min_block_hours)} h" if commitment.min_block_hours else ""
    kept = f"{target.name} {verb} {figure(asked)} MW{headroom} or more for {figure(commitment.hours - short)} h"
    text = f"{commitment.id}: {kept}{blocks}{row.when}, {figure(short)} h short of {figure(commitment.hours)} h"
    case.ledger.report("hours_at_least", pointer("commitments", place), short, "h", text, asset=target.asset)
