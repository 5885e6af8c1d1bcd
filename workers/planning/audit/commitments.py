"""Replay commitments of the kind `hours_at_least`, row by row.

    delivered = hours of the row's intervals with power at or above the threshold, or excused, in blocks long enough
    met       when delivered at (threshold + headroom) + counted before >= hours

A row is one target (an asset, or a sum of some) and, with `each_day`, one local day. What was counted before is
credited to the first row of each target. A priced row that is not met is paid for and breaks no rule.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import date

from schemas.commitments import HoursAtLeast
from schemas.fleet import Asset, Storage
from schemas.schedule import CommitmentResult
from workers.planning.audit.case import Case
from workers.planning.audit.ledger import figure, pointer
from workers.planning.audit.meters import net_power

_THRESHOLD_TOLERANCE_MW = 1e-6
_HOURS_TOLERANCE = 1e-9
"""Hours written as decimal fractions; far below the shortest interval."""


@dataclass(frozen=True)
class Readings:
    """The fleet's assets, and net powers per interval in MW: of each asset at its terminals, each site, the fleet."""

    assets: Mapping[str, Asset]
    power_mw: Mapping[str, Sequence[float]]
    site_mw: Mapping[str, Sequence[float]]
    fleet_mw: Sequence[float]


@dataclass(frozen=True)
class Target:
    """What a commitment is measured on: net power in MW, and the assets whose rated power counts.

    `asset` is set where it stands for itself, at its terminals.
    """

    asset: str | None
    name: str
    power_mw: Sequence[float]
    members: Sequence[Asset]


@dataclass(frozen=True)
class Row:
    """The intervals that count, and the local day with `each_day`."""

    day: date | None
    intervals: Sequence[int]


def replay_commitments(
    case: Case, power_mw: Mapping[str, Sequence[float]], site_mw: Mapping[str, Sequence[float]], fleet_mw: list[float]
) -> tuple[list[CommitmentResult], list[float]]:
    """Return all rows in the request's order and the price paid for each shortfall; breaches go to the ledger.

    Raises ValueError when a commitment names an asset or a site that the fleet does not have.
    """
    readings = Readings({asset.id: asset for asset in case.fleet.assets}, power_mw, site_mw, fleet_mw)
    results: list[CommitmentResult] = []
    costs: list[float] = []
    for place, commitment in enumerate(case.job.commitments):
        if not isinstance(commitment, HoursAtLeast):
            raise TypeError(commitment.kind)
        rows = rows_of(case, commitment)
        for target in _targets(case, commitment, readings):
            for result, cost in _replay_rows(case, place, commitment, target, rows):
                results.append(result)
                costs.append(cost)
    return results, costs


def rows_of(case: Case, commitment: HoursAtLeast) -> list[Row]:
    """List the rows of a commitment in order of time; a day or a stretch without an interval is none."""
    clock = case.clock
    inside = clock.starting_within(commitment.from_, commitment.to)
    if not commitment.each_day:
        return [Row(None, inside)]
    days = clock.days if commitment.between is None else clock.between(commitment.between[0], commitment.between[1])
    rows = [Row(day, [t for t in members if t in inside]) for day, members in days.items()]
    return [row for row in rows if row.intervals]


def _targets(case: Case, commitment: HoursAtLeast, readings: Readings) -> Iterator[Target]:
    over = commitment.applies_to
    unknown = [name for name in (*(over.assets or ()), *(over.group or ())) if name not in readings.assets]
    if over.site is not None and over.site not in readings.site_mw:
        unknown.append(over.site)
    if unknown:
        raise ValueError(f"commitment {commitment.id} names {unknown[0]}, which the fleet does not have")
    if over.assets is not None:
        for name in over.assets:
            yield Target(name, name, readings.power_mw[name], [readings.assets[name]])
    elif over.group is not None:
        members = [readings.assets[name] for name in over.group]
        yield Target(None, "the group", net_power(members, readings.power_mw, case.clock.count), members)
    elif over.site is not None:
        members = [asset for asset in case.fleet.assets if asset.site == over.site]
        yield Target(None, over.site, readings.site_mw[over.site], members)
    elif over.fleet:
        yield Target(None, "the fleet", readings.fleet_mw, case.fleet.assets)
    else:
        raise ValueError(f"commitment {commitment.id} applies to nothing")


def _rated_mw(members: Sequence[Asset], direction: str) -> float:
    stores = [asset for asset in members if isinstance(asset, Storage)]
    return sum(store.charge_limit_mw if direction == "charge" else store.discharge_limit_mw for store in stores)


def _threshold_mw(commitment: HoursAtLeast, target: Target) -> float:
    if commitment.threshold.mw is not None:
        return commitment.threshold.mw
    if commitment.threshold.fraction_of_rated is None:
        raise ValueError(f"commitment {commitment.id} has no threshold")
    return commitment.threshold.fraction_of_rated * _rated_mw(target.members, commitment.direction)


def _replay_rows(
    case: Case, place: int, commitment: HoursAtLeast, target: Target, rows: Sequence[Row]
) -> Iterator[tuple[CommitmentResult, float]]:
    threshold = _threshold_mw(commitment, target)
    asked = threshold + commitment.headroom_mw
    values = target.power_mw if commitment.direction == "discharge" else [-mw for mw in target.power_mw]
    excused = _excused(case, commitment)
    counts_as_asked = _counting(values, asked, excused)
    counts = counts_as_asked if asked == threshold else _counting(values, threshold, excused)
    shortest = round(commitment.min_block_hours / case.clock.hours)
    credit = _credit(case, commitment, target)
    for row in rows:
        as_asked = case.clock.hours_of(counted(row.intervals, counts_as_asked, shortest)) + credit
        delivered = case.clock.hours_of(counted(row.intervals, counts, shortest)) + credit
        credit = 0.0
        short = commitment.hours - as_asked
        met = short <= _HOURS_TOLERANCE
        case.ledger.checks += 1
        if met:
            _let_thresholds_pass(case, values, asked, row)
        elif commitment.shortfall_price_per_hour is None:
            _tell_short(case, place, commitment, target, row, asked, short)
        result = CommitmentResult(
            id=commitment.id,
            asset=target.asset,
            day=None if row.day is None else row.day.isoformat(),
            required_hours=commitment.hours,
            delivered_hours=delivered,
            met=met,
        )
        yield result, max(0.0, short) * (commitment.shortfall_price_per_hour or 0.0)


def _counting(values: Sequence[float], threshold: float, excused: set[int]) -> list[bool]:
    least = threshold - _THRESHOLD_TOLERANCE_MW
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


def _excused(case: Case, commitment: HoursAtLeast) -> set[int]:
    return {t for stretch in commitment.excused for t in case.clock.starting_within(stretch.from_, stretch.to)}


def _credit(case: Case, commitment: HoursAtLeast, target: Target) -> float:
    credit = case.job.counted_before.commitments.get(commitment.id, 0.0)
    if isinstance(credit, int | float):
        return credit
    if target.asset is None:
        raise ValueError(f"commitment {commitment.id} is over a sum: what was counted before is one number for it")
    return credit.get(target.asset, 0.0)


def _let_thresholds_pass(case: Case, values: Sequence[float], asked: float, row: Row) -> None:
    """Remember how far below the threshold an interval was that counted all the same."""
    nearest = min(
        (values[t] for t in row.intervals if asked - _THRESHOLD_TOLERANCE_MW <= values[t] < asked), default=asked
    )
    case.ledger.let_pass(asked - nearest)


def _tell_short(
    case: Case, place: int, commitment: HoursAtLeast, target: Target, row: Row, asked: float, short: float
) -> None:
    verb = "discharges" if commitment.direction == "discharge" else "charges"
    headroom = f" ({figure(commitment.headroom_mw)} MW of it headroom)" if commitment.headroom_mw else ""
    blocks = f" in blocks of at least {figure(commitment.min_block_hours)} h" if commitment.min_block_hours else ""
    when = "" if row.day is None else f" on {row.day}"
    kept = f"{target.name} {verb} {figure(asked)} MW{headroom} or more for {figure(commitment.hours - short)} h"
    text = f"{commitment.id}: {kept}{blocks}{when}, {figure(short)} h short of {figure(commitment.hours)} h"
    case.ledger.report("hours_at_least", pointer("commitments", place), short, "h", text, asset=target.asset)
