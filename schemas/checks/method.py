"""Whether the assets can be planned one by one, where the caller asks for it."""

from collections.abc import Iterator

from schemas.checks.request import Request
from schemas.coupling import couplings
from schemas.job import CheckJob, OneWindow
from schemas.problems import Fault


def faults(request: Request) -> Iterator[Fault]:
    """Name what couples the assets where `per_asset` is asked for; a replay uses no method."""
    job = request.job
    if job.method == "per_asset" and isinstance(job, OneWindow) and not isinstance(job, CheckJob):
        yield from couplings(job)
