"""What of the contract this version plans, and the refusal, by name, of the rest.

One line a thing that is not done yet: building it means deleting its line.
"""

from collections.abc import Iterator

from schemas.fleet import Fleet
from schemas.job import Job, OneWindow
from schemas.problems import Fault, Unsupported, pointer
from schemas.window import Window

UNSUPPORTED_TASKS = {"commitment_costs", "reschedule", "sequence"}
UNSUPPORTED_METHODS = {"coordinated"}
UNSUPPORTED_ASSET_KINDS = {"generator", "renewable", "flexible_load"}
UNSUPPORTED_COMMITMENT_KINDS = {
    "hours_at_most",
    "firm_delivery",
    "energy_at_least",
    "energy_at_most",
    "reserve_holding",
}
NO_STORE = "there is no store behind this command: give the document itself"
UNSUPPORTED_MEMBERS = {
    "fleet_id": NO_STORE,
    "window_id": NO_STORE,
    "initial_from_job_id": "there are no earlier jobs behind this command: give `initial`",
    "callback": "nobody is told of the end of a job yet",
    "explain_commitments": "commitments are not priced yet",
}


def require_supported(job: Job) -> None:
    """Raise `Unsupported` with one fault for each thing asked for that cannot be done yet."""
    if faults := list(_unsupported(job)):
        raise Unsupported(faults)


def _unsupported(job: Job) -> Iterator[Fault]:
    if job.task in UNSUPPORTED_TASKS:
        yield _fault(f"the task `{job.task}` is not done yet", "task")
    if job.method in UNSUPPORTED_METHODS:
        yield _fault(f"the method `{job.method}` is not offered yet", "method")
    for member, why in UNSUPPORTED_MEMBERS.items():
        if getattr(job, member, None):
            yield _fault(why, member)
    if job.fleet is not None:
        yield from _unsupported_in_fleet(job.fleet)
    if isinstance(job, OneWindow):
        yield from [] if job.window is None else _unsupported_in_window(job.window, "window")
    for position, commitment in enumerate(job.commitments):
        if commitment.kind in UNSUPPORTED_COMMITMENT_KINDS:
            detail = f"commitments of kind `{commitment.kind}` are not planned yet"
            yield _fault(detail, "commitments", position, "kind")


def _unsupported_in_fleet(fleet: Fleet) -> Iterator[Fault]:
    if fleet.lot_mw is not None:
        yield _fault("lots are not planned yet", "fleet", "lot_mw")
    for position, site in enumerate(fleet.sites):
        if site.lot_mw is not None:
            yield _fault("lots are not planned yet", "fleet", "sites", position, "lot_mw")
    for position, asset in enumerate(fleet.assets):
        if asset.kind in UNSUPPORTED_ASSET_KINDS:
            yield _fault(f"assets of kind `{asset.kind}` are not planned yet", "fleet", "assets", position, "kind")
        if getattr(asset, "reserve_products", None):
            yield _fault("reserve is not planned yet", "fleet", "assets", position, "reserve_products")


def _unsupported_in_window(window: Window, *steps: str) -> Iterator[Fault]:
    if window.reserve_products:
        yield _fault("reserve is not planned yet", *steps, "reserve_products")


def _fault(detail: str, *steps: str | int) -> Fault:
    return Fault(pointer=pointer(*steps), code="unsupported", detail=detail)
