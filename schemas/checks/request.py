"""A job as the checks see it: what it holds by name, and what is not known yet."""

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC
from functools import cached_property

from schemas.calendar import Calendar
from schemas.commitments import Promise
from schemas.fleet import Asset, Fleet, Site
from schemas.job import Job, OneWindow
from schemas.problems import Code, Fault, pointer
from schemas.window import ReserveProduct, Window

IDLE_MW = 1e-6
"""Power up to here counts as idle."""

Steps = tuple[str | int, ...]


def fault(code: Code, detail: str, *steps: str | int) -> Fault:
    """Name what is wrong at a place of the document."""
    return Fault(pointer=pointer(*steps), code=code, detail=detail)


@dataclass(frozen=True)
class Request:
    """A job under check; `unread` names the members that are faulty in themselves and stand empty here.

    A fleet or window given by id is unknown: what needs it is checked when the stored document is put in its place.
    """

    job: Job
    unread: frozenset[str] = frozenset()

    @property
    def fleet(self) -> Fleet | None:
        """The fleet, where it is given inline."""
        return self.job.fleet

    @cached_property
    def windows(self) -> tuple[tuple[Steps, Window], ...]:
        """Each window given inline, with the steps to it."""
        if isinstance(self.job, OneWindow):
            return () if self.job.window is None else ((("window",), self.job.window),)
        found = enumerate(self.job.windows)
        return tuple((("windows", position), window) for position, window in found if isinstance(window, Window))

    @cached_property
    def whole_horizon(self) -> bool:
        """Whether every window the job speaks of is given inline."""
        return bool(self.windows) and (isinstance(self.job, OneWindow) or len(self.windows) == len(self.job.windows))

    @cached_property
    def calendar(self) -> Calendar | None:
        """Intervals of the horizon; None while a window or the number of its intervals is unknown."""
        if not self.whole_horizon or any(window.intervals == 0 for _, window in self.windows):
            return None
        first = self.windows[0][1]
        count = sum(window.intervals for _, window in self.windows)
        return Calendar(first.start.astimezone(UTC), first.interval, count, first.timezone)

    @cached_property
    def products(self) -> dict[str, ReserveProduct] | None:
        """Reserve products by id; None while a window is unknown."""
        if not self.whole_horizon:
            return None
        return {product.id: product for _, window in self.windows for product in window.reserve_products}

    @cached_property
    def assets(self) -> dict[str, Asset]:
        """Assets by id, the first of each; empty while the fleet is unknown."""
        return {} if self.fleet is None else {asset.id: asset for asset in reversed(self.fleet.assets)}

    @cached_property
    def sites(self) -> dict[str, Site]:
        """Sites by id; empty while the fleet is unknown."""
        return {} if self.fleet is None else {site.id: site for site in self.fleet.sites}

    @cached_property
    def promises(self) -> dict[str, Promise]:
        """Commitments by id, the first of each."""
        return {promise.id: promise for promise in reversed(self.job.commitments)}

    @cached_property
    def members_by_site(self) -> dict[str, list[Asset]]:
        """Assets of each site that has any."""
        found: dict[str, list[Asset]] = {}
        for asset in self.assets.values():
            if asset.site is not None:
                found.setdefault(asset.site, []).append(asset)
        return found


def wrong_length(request: Request, series: object, *steps: str | int) -> Iterator[Fault]:
    """Name a series given as an array whose length is not the number of intervals."""
    calendar = request.calendar
    if calendar is not None and isinstance(series, list) and len(series) != calendar.count:
        detail = f"has {len(series)} entries where the window has {calendar.count} intervals"
        yield fault("wrong-length", detail, *steps)


def fits(hours: float, interval_hours: float) -> bool:
    """Tell whether a length of time is a whole number of intervals, to a billionth of an hour."""
    return abs(hours - round(hours / interval_hours) * interval_hours) <= 1e-9 * max(1.0, hours)
