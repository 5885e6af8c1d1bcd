"""Outages: of an asset that is there, over a stretch of time, in a direction it has."""

from collections.abc import Iterator

from schemas.checks.request import Request, fault
from schemas.fleet import Storage
from schemas.problems import Fault


def faults(request: Request) -> Iterator[Fault]:
    """Name outages of nothing, that end before they begin, or that speak of a direction the asset has not."""
    for position, outage in enumerate(request.job.outages):
        steps = ("outages", position)
        asset = request.assets.get(outage.asset)
        if request.fleet is not None and asset is None:
            yield fault("unknown-reference", f"there is no asset `{outage.asset}`", *steps, "asset")
        if outage.to is not None and outage.to <= outage.from_:
            yield fault("inconsistent", "the outage ends before it begins", *steps, "to")
        if asset is not None and not isinstance(asset, Storage):
            for member in ("available_charge_fraction", "available_discharge_fraction"):
                if getattr(outage, member) is not None:
                    detail = "only a store has two directions: give `available_fraction`"
                    yield fault("wrong-kind", detail, *steps, member)
