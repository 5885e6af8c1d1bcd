"""What counted before the window: towards commitments and assets that are there."""

from collections.abc import Iterator

from schemas.checks.request import Request, fault
from schemas.fleet import Storage
from schemas.problems import Fault


def faults(request: Request) -> Iterator[Fault]:
    """Name counts for a commitment, a member or an asset that has none."""
    if "commitments" not in request.unread:
        yield from _commitments(request)
    if request.fleet is None:
        return
    for name in request.job.counted_before.assets:
        asset = request.assets.get(name)
        steps = ("counted_before", "assets", name)
        if asset is None:
            yield fault("unknown-reference", f"there is no asset `{name}`", *steps)
        elif not isinstance(asset, Storage):
            yield fault("wrong-kind", "only a store has daily cycles and starts", *steps)


def _commitments(request: Request) -> Iterator[Fault]:
    for name, counted in request.job.counted_before.commitments.items():
        steps = ("counted_before", "commitments", name)
        promise = request.promises.get(name)
        if promise is None:
            yield fault("unknown-reference", f"there is no commitment `{name}`", *steps)
        elif isinstance(counted, dict):
            members = promise.applies_to.assets
            if members is None:
                yield fault("wrong-kind", "a commitment on a sum has one figure, not one for each asset", *steps)
                continue
            for asset in counted.keys() - set(members):
                yield fault("unknown-reference", f"`{asset}` is not bound by this commitment", *steps, asset)
