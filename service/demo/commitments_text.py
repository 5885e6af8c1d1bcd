"""Commitments of a schedule, for a person to read: what was asked, what is planned, what is left over."""

from collections.abc import Iterator
from math import fsum

from schemas.commitments import HoursAtLeast
from schemas.fleet import Storage
from schemas.job import ScheduleJob
from schemas.schedule import CommitmentResult, Schedule


def commitments_text(job: ScheduleJob, schedule: Schedule) -> Iterator[str]:
    """Write a line for each row of each commitment; a priced one says what falling short costs."""
    yield (
        f"{'commitment':13} {'by':10} {'at least, MW':>12} {'unbroken':>8} {'between':>11} "
        f"{'asked, h':>9} {'planned':>8} {'spare':>6}  {'met':3}  short?"
    )
    asked = {commitment.id: commitment for commitment in job.commitments}
    for row in schedule.commitments:
        commitment = asked[row.id]
        if isinstance(commitment, HoursAtLeast):
            yield _row(job, schedule.currency, commitment, row)


def _row(job: ScheduleJob, currency: str, asked: HoursAtLeast, row: CommitmentResult) -> str:
    required, planned = row.required_hours or 0.0, row.delivered_hours or 0.0
    runs = f"{asked.min_block_hours:g} h" if asked.min_block_hours else "-"
    return (
        f"{row.id:13} {_whom(asked, row):10} {_threshold(job, asked, row):>12} {runs:>8} {_between(asked):>11} "
        f"{required:9.2f} {planned:8.2f} {planned - required:+6.2f}  {_verdict(asked, row, currency)}"
    )


def _whom(asked: HoursAtLeast, row: CommitmentResult) -> str:
    scope = asked.applies_to
    if scope.group is not None:
        return f"{len(scope.group)} together"
    return row.asset or scope.site or "the fleet"


def notes_text(job: ScheduleJob) -> Iterator[str]:
    """Write what the table has no room for: who keeps a commitment together, and what headroom is."""
    for asked in job.commitments:
        if not isinstance(asked, HoursAtLeast):
            continue
        if asked.applies_to.group is not None:
            yield f"{asked.id}: {', '.join(asked.applies_to.group)} together, as one sum."
        if asked.headroom_mw:
            yield f"{asked.id}: planned with {asked.headroom_mw:g} MW of headroom above what counts."


def threshold_mw(job: ScheduleJob, asked: HoursAtLeast, asset: str | None) -> float:
    """Return the power from which an hour counts, without headroom; a fraction is one of the rated power."""
    if asked.threshold.mw is not None:
        return asked.threshold.mw
    scope = asked.applies_to
    stores = [store for store in (job.fleet.assets if job.fleet else ()) if isinstance(store, Storage)]
    if asset is not None:
        stores = [store for store in stores if store.id == asset]
    elif scope.group is not None:
        stores = [store for store in stores if store.id in scope.group]
    elif scope.site is not None:
        stores = [store for store in stores if store.site == scope.site]
    is_out = asked.direction == "discharge"
    rated_mw = fsum(store.discharge_limit_mw if is_out else store.charge_limit_mw for store in stores)
    return (asked.threshold.fraction_of_rated or 0.0) * rated_mw


def _threshold(job: ScheduleJob, asked: HoursAtLeast, row: CommitmentResult) -> str:
    headroom = f" +{asked.headroom_mw:.2f}" if asked.headroom_mw else ""
    return f"{threshold_mw(job, asked, row.asset):.2f}{headroom}"


def _between(asked: HoursAtLeast) -> str:
    if asked.between is not None:
        return "-".join(f"{clock:%H:%M}" for clock in asked.between)
    begin = f"{asked.from_:%H:%M}" if asked.from_ else "start"
    return f"{begin}-{asked.to:%H:%M}" if asked.to else f"{begin}-end"


def _verdict(asked: HoursAtLeast, row: CommitmentResult, currency: str) -> str:
    price = asked.shortfall_price_per_hour
    return f"{'yes' if row.met else 'NO':3}  " + ("never" if price is None else f"{price:g} {currency}/h")
