"""Commitments: whom they bind, to what, and which intervals count."""

from collections.abc import Iterator
from datetime import datetime, time
from zoneinfo import ZoneInfo

from schemas.calendar import Calendar
from schemas.checks.request import Request, Steps, fault, fits
from schemas.commitments import HoursAtLeast, HoursAtMost, Promise, ReserveHolding
from schemas.fleet import Asset, FixedLoad, FlexibleLoad, Generator, Renewable, Storage
from schemas.problems import Fault

_NO_SUCH_DIRECTION = {
    "discharge": (FlexibleLoad, FixedLoad),
    "charge": (Generator, Renewable),
}


def faults(request: Request) -> Iterator[Fault]:
    """Name what in a commitment has no meaning for the fleet or the window it is asked of."""
    borders = _Borders(request.calendar)
    for position, promise in enumerate(request.job.commitments):
        steps = ("commitments", position)
        yield from _bound(request, promise, steps)
        if isinstance(promise, HoursAtLeast | HoursAtMost):
            yield from _threshold(request, promise, steps)
            yield from _hours(request, promise, steps)
        if isinstance(promise, ReserveHolding):
            yield from _reserve(request, promise, steps)
        yield from borders.faults(promise, steps)


def _bound(request: Request, promise: Promise, steps: Steps) -> Iterator[Fault]:
    """Check whom a commitment binds: one kind of target, members that are there, once, and can do what is asked."""
    target = promise.applies_to
    place = (*steps, "applies_to")
    given = [name for name in ("assets", "group", "site", "fleet") if getattr(target, name) is not None]
    if len(given) != 1:
        yield fault("exactly-one", "exactly one of `assets`, `group`, `site` and `fleet` is required", *place)
    if request.fleet is not None and target.site is not None and target.site not in request.sites:
        yield fault("unknown-reference", f"there is no site `{target.site}`", *place, "site")
    unfit = _NO_SUCH_DIRECTION.get(getattr(promise, "direction", ""), ())
    for name in ("assets", "group"):
        seen: set[str] = set()
        for member, asset_id in enumerate(getattr(target, name) or ()):
            asset = request.assets.get(asset_id)
            if asset_id in seen:
                yield fault("duplicate", f"`{asset_id}` is named twice", *place, name, member)
            elif request.fleet is not None and asset is None:
                yield fault("unknown-reference", f"there is no asset `{asset_id}`", *place, name, member)
            elif name == "assets" and isinstance(asset, unfit):
                direction = getattr(promise, "direction", "")
                detail = f"an asset of kind `{asset.kind}` cannot {direction}: the `direction` does not fit it"
                yield fault("wrong-kind", detail, *place, name, member)
            seen.add(asset_id)


def _threshold(request: Request, promise: HoursAtLeast | HoursAtMost, steps: Steps) -> Iterator[Fault]:
    threshold = promise.threshold
    if (threshold.fraction_of_rated is None) == (threshold.mw is None):
        detail = "exactly one of `fraction_of_rated` and `mw` is required"
        yield fault("exactly-one", detail, *steps, "threshold")
    if threshold.fraction_of_rated is None or request.fleet is None:
        return
    rated = {asset.id: _rated_mw(asset, promise.direction) for asset in _members(request, promise)}
    if promise.applies_to.assets is None:
        lacking = [] if any(rated.values()) else ["what it binds"]
    else:
        lacking = [f"`{name}`" for name, power in rated.items() if not power]
    if rated and lacking:
        detail = f"{lacking[0]} has no rated power to {promise.direction}: give the threshold in `mw`"
        yield fault("wrong-kind", detail, *steps, "threshold", "fraction_of_rated")


def _members(request: Request, promise: Promise) -> list[Asset]:
    target = promise.applies_to
    if target.fleet:
        return list(request.assets.values())
    if target.site is not None:
        return request.members_by_site.get(target.site, [])
    named = target.assets or target.group or ()
    return [request.assets[name] for name in named if name in request.assets]


def _rated_mw(asset: Asset, direction: str) -> float | None:
    if isinstance(asset, Storage):
        return asset.charge_limit_mw if direction == "charge" else asset.discharge_limit_mw
    return asset.max_output_mw if isinstance(asset, Generator) and direction == "discharge" else None


def _hours(request: Request, promise: HoursAtLeast | HoursAtMost, steps: Steps) -> Iterator[Fault]:
    if not request.windows:
        return
    interval_hours = request.windows[0][1].interval_hours
    for name in ("hours", "min_block_hours"):
        hours = getattr(promise, name, 0.0)
        if not fits(hours, interval_hours):
            minutes = round(60 * interval_hours)
            detail = f"{hours:.10g} h is not a whole number of intervals of {minutes} min"
            yield fault("off-border", detail, *steps, name)


def _reserve(request: Request, promise: ReserveHolding, steps: Steps) -> Iterator[Fault]:
    if request.products is not None and promise.product not in request.products:
        yield fault("unknown-reference", f"there is no reserve product `{promise.product}`", *steps, "product")
    for member, name in enumerate(promise.applies_to.assets or ()):
        asset = request.assets.get(name)
        place = (*steps, "applies_to", "assets", member)
        if isinstance(asset, Storage | Generator):
            if asset.reserve_products is not None and promise.product not in asset.reserve_products:
                yield fault("wrong-kind", f"`{name}` may not hold `{promise.product}`", *place)
        elif asset is not None:
            yield fault("wrong-kind", f"an asset of kind `{asset.kind}` holds no reserve", *place)


class _Borders:
    """Checks the times of commitments against the interval borders of one calendar."""

    def __init__(self, calendar: Calendar | None) -> None:
        self._calendar = calendar
        self._misfits: dict[time, str | None] = {}

    def faults(self, promise: Promise, steps: Steps) -> Iterator[Fault]:
        """Name stretches that are empty, and times between the interval borders."""
        begin, end = promise.from_, promise.to
        if begin is not None and end is not None and begin >= end:
            yield fault("inconsistent", "`to` is not after `from`", *steps, "to")
        yield from self._off(begin, *steps, "from")
        yield from self._off(end, *steps, "to")
        for position, stretch in enumerate(getattr(promise, "excused", ())):
            place = (*steps, "excused", position)
            if stretch.from_ >= stretch.to:
                yield fault("inconsistent", "`to` is not after `from`", *place, "to")
            yield from self._off(stretch.from_, *place, "from")
            yield from self._off(stretch.to, *place, "to")
        yield from self._between(promise, (*steps, "between"))

    def _off(self, instant: datetime | None, *steps: str | int) -> Iterator[Fault]:
        if self._calendar is not None and instant is not None and not self._calendar.is_border(instant):
            yield fault("off-border", "not on an interval border", *steps)

    def _between(self, promise: Promise, steps: Steps) -> Iterator[Fault]:
        if promise.between is None:
            return
        if not promise.each_day:
            yield fault("inconsistent", "needs `each_day`", *steps)
        if promise.between[0] == promise.between[1]:
            yield fault("inconsistent", "the two times of day are the same", *steps)
        for position, clock in enumerate(promise.between):
            if misfit := self._misfit(clock):
                yield fault("off-border", f"not on an interval border on {misfit}", *steps, position)

    def _misfit(self, clock: time) -> str | None:
        """Name the first day of the window on which a wall time lies between two borders."""
        if self._calendar is None:
            return None
        if clock not in self._misfits:
            zone = ZoneInfo(self._calendar.timezone)
            days = (day for day, _ in self._calendar.day_ranges)
            off = (day for day in days if not self._calendar.is_border(datetime.combine(day, clock, zone)))
            first = next(off, None)
            self._misfits[clock] = None if first is None else first.isoformat()
        return self._misfits[clock]
