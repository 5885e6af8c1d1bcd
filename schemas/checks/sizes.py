"""Limits on counts that no single member shows, and series of another length than the window."""

from collections.abc import Iterator

from schemas.calendar import rows_of
from schemas.checks.request import Request, fault, wrong_length
from schemas.commitments import FirmDelivery, Promise, ReserveHolding
from schemas.problems import Fault
from schemas.quantities import MAX_ASSET_INTERVALS, MAX_COMMITMENT_ROWS


def faults(request: Request) -> Iterator[Fault]:
    """Name what is larger than the contract allows, and every array whose length is not that of the window."""
    calendar = request.calendar
    if calendar is None:
        return
    assets = 0 if request.fleet is None else len(request.fleet.assets)
    if assets * calendar.count > MAX_ASSET_INTERVALS:
        size = f"{assets} assets x {calendar.count} intervals are {assets * calendar.count}"
        yield fault("too-large", f"{size}; the limit is {MAX_ASSET_INTERVALS}", "fleet", "assets")
    if _has_too_many_rows(request):
        yield fault("too-large", f"more commitment rows than the limit of {MAX_COMMITMENT_ROWS}", "commitments")
    yield from _lengths(request)


def _has_too_many_rows(request: Request) -> bool:
    rows = 0
    for promise in request.job.commitments:
        rows += _days(request, promise) * len(promise.applies_to.assets or (None,))
        if rows > MAX_COMMITMENT_ROWS:
            return True
    return False


def _days(request: Request, promise: Promise) -> int:
    if not promise.each_day or request.calendar is None:
        return 1
    return len(rows_of(promise, request.calendar))


def _lengths(request: Request) -> Iterator[Fault]:
    job = request.job
    for member in ("forecasts", "positions"):
        for name, series in getattr(job, member).items():
            yield from wrong_length(request, series, member, name)
    for name, limits in job.limits.items():
        yield from wrong_length(request, limits.export_limit_mw, "limits", name, "export_limit_mw")
        yield from wrong_length(request, limits.import_limit_mw, "limits", name, "import_limit_mw")
    for position, promise in enumerate(job.commitments):
        if isinstance(promise, FirmDelivery | ReserveHolding):
            yield from wrong_length(request, promise.power_mw, "commitments", position, "power_mw")
