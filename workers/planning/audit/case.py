"""Hold what every check of one audit looks at, and refuse what this audit cannot replay."""

from collections.abc import Iterator
from dataclasses import dataclass

from schemas.commitments import HoursAtLeast
from schemas.fleet import FixedLoad, Fleet, Storage
from schemas.job import OneWindow, Outage, RescheduleJob
from schemas.window import Window
from workers.planning.audit.clock import Clock
from workers.planning.audit.ledger import Ledger, pointer


class NotAuditedError(NotImplementedError):
    """Name something in a request that this audit cannot replay, and where it stands."""

    def __init__(self, what: str, where: str) -> None:
        super().__init__(what, where)
        self.what = what
        self.pointer = where

    def __str__(self) -> str:
        return f"{self.what} at {self.pointer} cannot be audited"


@dataclass(frozen=True)
class Case:
    """One request under audit: job, fleet and window, the audit's clock and its ledger."""

    job: OneWindow
    fleet: Fleet
    window: Window
    clock: Clock
    ledger: Ledger
    outages: dict[str, list[tuple[int, Outage]]]


def open_case(job: OneWindow) -> Case:
    """Return what is to be audited.

    Raises ValueError when fleet or window are not inline or the window has no intervals, NotAuditedError for what this
    audit has no rule for: nothing of a request is passed over in silence.
    """
    if job.fleet is None or job.window is None:
        raise ValueError("an audit needs the fleet and the window inline")
    for what, where in _unknown_ground(job, job.fleet, job.window):
        raise NotAuditedError(what, where)
    clock = Clock(job.window)
    outages: dict[str, list[tuple[int, Outage]]] = {}
    for place, outage in enumerate(job.outages):
        outages.setdefault(outage.asset, []).append((place, outage))
    return Case(job, job.fleet, job.window, clock, Ledger(clock.starts), outages)


def _unknown_ground(job: OneWindow, fleet: Fleet, window: Window) -> Iterator[tuple[str, str]]:
    if isinstance(job, RescheduleJob):
        yield "task reschedule", "/task"
    if fleet.lot_mw is not None:
        yield "lot_mw", "/fleet/lot_mw"
    for place, site in enumerate(fleet.sites):
        if site.lot_mw is not None:
            yield "lot_mw", pointer("fleet", "sites", place, "lot_mw")
    for place, asset in enumerate(fleet.assets):
        if not isinstance(asset, Storage | FixedLoad):
            yield f"asset kind {asset.kind}", pointer("fleet", "assets", place, "kind")
    for place, commitment in enumerate(job.commitments):
        if not isinstance(commitment, HoursAtLeast):
            yield f"commitment kind {commitment.kind}", pointer("commitments", place, "kind")
    if window.reserve_products:
        yield "reserve products", "/window/reserve_products"
