"""Hold what every check of one audit looks at, and refuse what this audit cannot replay."""

from dataclasses import dataclass

from schemas.fleet import Fleet
from schemas.job import OneWindow, Outage, RescheduleJob
from schemas.window import Window
from workers.planning.audit.clock import Clock
from workers.planning.audit.ledger import Ledger
from workers.planning.audit.reserve_market import Offer, read_offers


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
    """One request under audit: job, fleet and window, the audit's clock and its ledger, reserve products by id."""

    job: OneWindow
    fleet: Fleet
    window: Window
    clock: Clock
    ledger: Ledger
    outages: dict[str, list[tuple[int, Outage]]]
    offers: dict[str, Offer]


def open_case(job: OneWindow) -> Case:
    """Return what is to be audited.

    Raises ValueError when fleet or window are not inline or the window has no intervals, NotAuditedError for what this
    audit has no rule for: nothing of a request is passed over in silence.
    """
    if job.fleet is None or job.window is None:
        raise ValueError("an audit needs the fleet and the window inline")
    if isinstance(job, RescheduleJob):
        raise NotAuditedError("task reschedule", "/task")
    clock = Clock(job.window)
    outages: dict[str, list[tuple[int, Outage]]] = {}
    for place, outage in enumerate(job.outages):
        outages.setdefault(outage.asset, []).append((place, outage))
    return Case(job, job.fleet, job.window, clock, Ledger(clock.starts), outages, read_offers(job.window, clock))
