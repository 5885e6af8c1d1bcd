"""What is keyed by a meter: positions sold already, today's limits, the month's peak."""

from collections.abc import Iterator

from schemas.checks.names import FLEET
from schemas.checks.request import Request, fault
from schemas.problems import Fault


def faults(request: Request) -> Iterator[Fault]:
    """Name positions, limits and peaks that belong to no meter, or to another one than the settlement's."""
    yield from _positions(request)
    if request.fleet is None:
        return
    for name in request.job.limits:
        if name != FLEET and name not in request.sites:
            yield fault("unknown-reference", f"there is no site `{name}`, and it is not `fleet`", "limits", name)
    for name in request.job.counted_before.sites:
        if name not in request.sites:
            yield fault("unknown-reference", f"there is no site `{name}`", "counted_before", "sites", name)


def _positions(request: Request) -> Iterator[Fault]:
    settlement = {window.settled_at for _, window in request.windows} if request.whole_horizon else set()
    for name in request.job.positions:
        steps = ("positions", name)
        asset = request.assets.get(name)
        if name == FLEET:
            if settlement == {"site"}:
                yield fault("wrong-kind", "the window is settled at each site, not at the fleet", *steps)
        elif request.fleet is not None and asset is None and name not in request.sites:
            yield fault("unknown-reference", f"there is no meter `{name}`", *steps)
        elif settlement == {"fleet"}:
            yield fault("wrong-kind", "the window is settled at the fleet: its position is that of `fleet`", *steps)
        elif asset is not None and asset.site is not None and name not in request.sites:
            yield fault("wrong-kind", f"`{name}` has no meter of its own, but that of its site", *steps)
