"""Forecasts and energy needs: for the assets that have them, all of those, and no others."""

from collections.abc import Iterator
from itertools import pairwise

from schemas.checks.request import Request, fault
from schemas.fleet import FixedLoad, FlexibleLoad, Renewable
from schemas.job import EnergyNeed
from schemas.problems import Fault


def faults(request: Request) -> Iterator[Fault]:
    """Name forecasts and needs that are missing, for the wrong asset, off the interval borders or overlapping."""
    if request.fleet is not None:
        yield from _forecasts(request)
    for name, needs in request.job.energy_needs.items():
        asset = request.assets.get(name)
        if request.fleet is not None and asset is None:
            yield fault("unknown-reference", f"there is no asset `{name}`", "energy_needs", name)
        elif asset is not None and not isinstance(asset, FlexibleLoad):
            detail = f"an asset of kind `{asset.kind}` has no energy needs"
            yield fault("wrong-kind", detail, "energy_needs", name)
        yield from _needs(request, name, needs)


def _forecasts(request: Request) -> Iterator[Fault]:
    given = request.job.forecasts
    for name in given:
        asset = request.assets.get(name)
        if asset is None:
            yield fault("unknown-reference", f"there is no asset `{name}`", "forecasts", name)
        elif not isinstance(asset, Renewable | FixedLoad):
            yield fault("wrong-kind", f"an asset of kind `{asset.kind}` has no forecast", "forecasts", name)
    if "forecasts" in request.unread:
        return
    for name, asset in request.assets.items():
        if isinstance(asset, Renewable | FixedLoad) and name not in given:
            yield fault("missing", f"a forecast for `{name}` is required", "forecasts", name)


def _needs(request: Request, name: str, needs: list[EnergyNeed]) -> Iterator[Fault]:
    calendar = request.calendar
    if calendar is None:
        return
    spans = []
    for position, need in enumerate(needs):
        begin, end = need.from_ or calendar.start, need.to or calendar.end
        for member, instant in (("from", begin), ("to", end)):
            if not calendar.is_border(instant):
                yield fault("off-border", "not on an interval border", "energy_needs", name, position, member)
        if begin >= end:
            yield fault("inconsistent", "ends before it begins", "energy_needs", name, position)
        else:
            spans.append((begin, end, position))
    for (_, before_ends, before), (begins, _, position) in pairwise(sorted(spans)):
        if begins < before_ends:
            detail = f"overlaps need {before} of the same asset"
            yield fault("overlap", detail, "energy_needs", name, position)
