"""From the request to arrays: the only place where units, days, outages and limits are converted.

Everything after this module works on intervals, MW, MWh and the window's currency. The audit never sees it.
"""

from collections.abc import Iterable
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from schemas.calendar import Calendar, rows_of
from schemas.commitments import HoursAtLeast
from schemas.fleet import FixedLoad, Fleet, Storage
from schemas.job import OneWindow
from schemas.window import Window
from workers.planning.availability import Availability, availability_of
from workers.planning.store import Store, store_of

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Meter:
    """One meter: a site, or an asset without one.

    `load_mw` is what its fixed loads and standby loads draw, T values, positive out of the grid; `position_mw`
    what was sold already, positive into it. Limits are T values, infinite where there is none.
    """

    id: str
    pointer: str
    stores: tuple[int, ...]
    load_mw: Floats
    export_limit_mw: Floats
    import_limit_mw: Floats
    position_mw: Floats
    export_fee_per_mwh: float = 0.0
    import_fee_per_mwh: float = 0.0
    peak_import_charge_per_mw: float = 0.0
    peak_so_far_mw: float = 0.0

    @property
    def is_limited(self) -> bool:
        """Tell whether the connection has any limit."""
        return bool(np.isfinite(self.export_limit_mw).any() or np.isfinite(self.import_limit_mw).any())


@dataclass(frozen=True)
class HoursRow:
    """One row of an `hours_at_least` commitment.

    Power is that of `stores` less `load_mw` (T values; zero for a commitment on assets), times `sign` (+1
    discharge, -1 charge). `intervals` are those that count, `excused` the ones among them that count whatever
    the power; `due_hours` is what is left to deliver after the credit.
    """

    commitment: int
    id: str
    asset: str | None
    day: str | None
    stores: tuple[int, ...]
    load_mw: Floats
    sign: float
    threshold_mw: float
    intervals: tuple[int, ...]
    excused: frozenset[int]
    due_hours: float
    min_block: int
    shortfall_price_per_hour: float | None

    @property
    def pointer(self) -> str:
        """Where the commitment stands in the request."""
        return f"/commitments/{self.commitment}"


@dataclass(frozen=True)
class Instance:
    """A request in arrays: T intervals of `hours` each, stores, meters, rows.

    `buy` and `sell` are prices per MWh, T values. With `settles_fleet` one settlement covers all meters, against
    `fleet`'s position. `fixed_loads` are ids whose power follows from `load_mw` alone.
    """

    calendar: Calendar
    hours: float
    buy: Floats
    sell: Floats
    settles_fleet: bool
    stores: tuple[Store, ...]
    meters: tuple[Meter, ...]
    fleet: Meter
    rows: tuple[HoursRow, ...]
    relative_gap: float
    absolute_gap: float
    fixed_loads: tuple[str, ...] = field(default=())

    @property
    def intervals(self) -> int:
        """Number of intervals T."""
        return len(self.buy)

    @property
    def has_one_price(self) -> bool:
        """Tell whether buying and selling cost the same everywhere."""
        return bool((self.buy == self.sell).all())

    def part(self, meters: Iterable[Meter], rows: Iterable[HoursRow]) -> "Instance":
        """Take some meters with their stores and rows as an instance of their own, stores numbered anew."""
        kept = tuple(meters)
        numbers = [store for meter in kept for store in meter.stores]
        renumbered = {old: new for new, old in enumerate(numbers)}
        kept = tuple(replace(meter, stores=tuple(renumbered[s] for s in meter.stores)) for meter in kept)
        own_rows = tuple(replace(row, stores=tuple(renumbered[s] for s in row.stores)) for row in rows)
        load: Floats = sum((meter.load_mw for meter in kept), start=np.zeros(self.intervals))
        fleet = replace(self.fleet, stores=tuple(range(len(numbers))), load_mw=load)
        stores = tuple(self.stores[number] for number in numbers)
        return replace(self, stores=stores, meters=kept, fleet=fleet, rows=own_rows)


def instance_of(job: OneWindow) -> Instance:
    """Index a validated job whose fleet and window are inline."""
    fleet, window = job.fleet, job.window
    if fleet is None or window is None:
        raise ValueError("the job must carry its fleet and its window inline")
    calendar = Calendar.of(window)
    available = availability_of(job, calendar)
    stores = tuple(
        store_of(job, asset, calendar, available.get(asset.id)) for asset in fleet.assets if isinstance(asset, Storage)
    )
    numbers = {store.id: number for number, store in enumerate(stores)}
    loads = {
        asset.id: _series(job.forecasts[asset.id], calendar.count) * _share(available, asset.id, calendar.count)
        for asset in fleet.assets
        if isinstance(asset, FixedLoad)
    }
    meters = _meters(job, fleet, stores, numbers, loads, calendar.count)
    whole = _fleet_meter(job, fleet, meters, calendar.count)
    buy, sell = _prices(window, calendar.count)
    return Instance(
        calendar=calendar,
        hours=calendar.hours,
        buy=buy,
        sell=sell,
        settles_fleet=window.settled_at == "fleet",
        stores=stores,
        meters=meters,
        fleet=whole,
        rows=tuple(_rows(job, fleet, stores, numbers, loads, calendar)),
        relative_gap=job.relative_gap,
        absolute_gap=job.absolute_gap,
        fixed_loads=tuple(loads),
    )


def _series(value: float | list[float], count: int) -> Floats:
    return np.full(count, value, dtype=float) if isinstance(value, int | float) else np.asarray(value, dtype=float)


def _share(available: dict[str, Availability], asset: str, count: int) -> Floats:
    return available[asset].charge if asset in available else np.ones(count)


def _prices(window: Window, count: int) -> tuple[Floats, Floats]:
    if window.price_per_mwh is not None:
        price = _series(window.price_per_mwh, count)
        return price, price
    if window.buy_price_per_mwh is None or window.sell_price_per_mwh is None:
        raise ValueError("a window has one price, or a price to buy and one to sell")
    return _series(window.buy_price_per_mwh, count), _series(window.sell_price_per_mwh, count)


def _limit(job: OneWindow, meter: str, member: str, own: float | None, count: int) -> Floats:
    todays = job.limits.get(meter)
    value = getattr(todays, member) if todays is not None else None
    if value is None:
        value = np.inf if own is None else own
    return _series(value, count)


def _meters(
    job: OneWindow,
    fleet: Fleet,
    stores: tuple[Store, ...],
    numbers: dict[str, int],
    loads: dict[str, Floats],
    count: int,
) -> tuple[Meter, ...]:
    members: dict[str, list[str]] = {site.id: [] for site in fleet.sites}
    pointers = {site.id: f"/fleet/sites/{k}" for k, site in enumerate(fleet.sites)}
    for k, asset in enumerate(fleet.assets):
        members.setdefault(asset.site or asset.id, []).append(asset.id)
        if asset.site is None:
            pointers[asset.id] = f"/fleet/assets/{k}"
    sites = {site.id: site for site in fleet.sites}
    found = []
    for meter, assets in members.items():
        site = sites.get(meter)
        counted = job.counted_before.sites.get(meter)
        own = tuple(numbers[asset] for asset in assets if asset in numbers)
        found.append(
            Meter(
                id=meter,
                pointer=pointers[meter],
                stores=own,
                load_mw=_load(assets, stores, numbers, loads, count),
                export_limit_mw=_limit(job, meter, "export_limit_mw", site.export_limit_mw if site else None, count),
                import_limit_mw=_limit(job, meter, "import_limit_mw", site.import_limit_mw if site else None, count),
                position_mw=_series(job.positions.get(meter, 0.0), count),
                export_fee_per_mwh=site.export_fee_per_mwh if site else 0.0,
                import_fee_per_mwh=site.import_fee_per_mwh if site else 0.0,
                peak_import_charge_per_mw=site.peak_import_charge_per_mw if site else 0.0,
                peak_so_far_mw=counted.peak_import_mw if counted else 0.0,
            )
        )
    return tuple(found)


def _load(
    assets: Iterable[str], stores: tuple[Store, ...], numbers: dict[str, int], loads: dict[str, Floats], count: int
) -> Floats:
    """Sum what fixed loads and standby loads of these assets draw, MW per interval."""
    drawn = np.zeros(count)
    for asset in assets:
        if asset in loads:
            drawn += loads[asset]
        elif asset in numbers:
            drawn += stores[numbers[asset]].standby_load_mw
    return drawn


def _fleet_meter(job: OneWindow, fleet: Fleet, meters: tuple[Meter, ...], count: int) -> Meter:
    load: Floats = sum((meter.load_mw for meter in meters), start=np.zeros(count))
    return Meter(
        id="fleet",
        pointer="/fleet",
        stores=tuple(store for meter in meters for store in meter.stores),
        load_mw=load,
        export_limit_mw=_limit(job, "fleet", "export_limit_mw", fleet.export_limit_mw, count),
        import_limit_mw=_limit(job, "fleet", "import_limit_mw", fleet.import_limit_mw, count),
        position_mw=_series(job.positions.get("fleet", 0.0), count),
    )


def _rows(
    job: OneWindow,
    fleet: Fleet,
    stores: tuple[Store, ...],
    numbers: dict[str, int],
    loads: dict[str, Floats],
    calendar: Calendar,
) -> Iterable[HoursRow]:
    everything = [asset.id for asset in fleet.assets]
    at_site: dict[str, list[str]] = {}
    for asset in fleet.assets:
        if asset.site is not None:
            at_site.setdefault(asset.site, []).append(asset.id)
    for number, commitment in enumerate(job.commitments):
        if not isinstance(commitment, HoursAtLeast):
            raise ValueError(f"commitment {commitment.id} is of a kind that is not planned")
        whom = commitment.applies_to
        if whom.assets is not None:
            bound: list[tuple[str | None, list[str]]] = [(asset, [asset]) for asset in whom.assets]
        else:
            of_site = at_site.get(whom.site, []) if whom.site is not None else everything
            bound = [(None, list(whom.group) if whom.group is not None else of_site)]
        stretches = rows_of(commitment, calendar)
        excused = frozenset(
            k for stretch in commitment.excused for k in calendar.starting_within(stretch.from_, stretch.to)
        )
        for whose, members in bound:
            own = tuple(numbers[member] for member in members if member in numbers)
            if whose is None:
                load = _load(members, stores, numbers, loads, calendar.count)
            else:
                load = loads.get(whose, np.zeros(calendar.count))
            for order, stretch in enumerate(stretches):
                yield HoursRow(
                    commitment=number,
                    id=commitment.id,
                    asset=whose,
                    day=stretch.day.isoformat() if stretch.day else None,
                    stores=own,
                    load_mw=load,
                    sign=1.0 if commitment.direction == "discharge" else -1.0,
                    threshold_mw=_threshold(commitment, [stores[k] for k in own]) + commitment.headroom_mw,
                    intervals=stretch.intervals,
                    excused=excused.intersection(stretch.intervals),
                    due_hours=commitment.hours - (_credit(job, commitment, whose) if order == 0 else 0.0),
                    min_block=max(1, round(commitment.min_block_hours / calendar.hours)),
                    shortfall_price_per_hour=commitment.shortfall_price_per_hour,
                )


def _threshold(commitment: HoursAtLeast, stores: list[Store]) -> float:
    if commitment.threshold.mw is not None:
        return commitment.threshold.mw
    charging = commitment.direction == "charge"
    rated = sum(store.rated_charge_mw if charging else store.rated_discharge_mw for store in stores)
    return (commitment.threshold.fraction_of_rated or 0.0) * rated


def _credit(job: OneWindow, commitment: HoursAtLeast, asset: str | None) -> float:
    counted = job.counted_before.commitments.get(commitment.id, 0.0)
    if isinstance(counted, dict):
        return counted.get(asset, 0.0) if asset is not None else 0.0
    return counted
