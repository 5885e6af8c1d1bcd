"""From the request to arrays: the only place where units, days, outages and limits are converted.

Everything after this module works on intervals, MW, MWh and the window's currency. The audit never sees it.
"""

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, replace

import numpy as np

from schemas.calendar import Calendar
from schemas.fleet import FixedLoad, Fleet, FlexibleLoad, Generator, Renewable, Storage
from schemas.job import OneWindow
from schemas.window import Window
from workers.planning.availability import Availability, availability_of
from workers.planning.flows import flexible_load_of, renewable_of
from workers.planning.generator import generator_of
from workers.planning.reserve import Product, products_of_window
from workers.planning.rows import CommitmentRow, Ground, rows_of_job
from workers.planning.store import Store, store_of
from workers.planning.units import Booleans, Floats, Unit, series


@dataclass(frozen=True)
class Meter:
    """One meter: a site, or an asset without one.

    `load_mw` is what its fixed loads and standby loads draw, T values, positive out of the grid; `position_mw`
    what was sold already, positive into it. Limits are T values, infinite where there is none; `excess_price` is what a
    MW beyond them costs per hour where a diagnosis looks for the nearest schedule (None: they bind).
    """

    id: str
    units: tuple[int, ...]
    load_mw: Floats
    lot_mw: float | None
    export_limit_mw: Floats
    import_limit_mw: Floats
    position_mw: Floats
    export_fee_per_mwh: float = 0.0
    import_fee_per_mwh: float = 0.0
    peak_import_charge_per_mw: float = 0.0
    peak_so_far_mw: float = 0.0
    excess_price: float | None = None

    @property
    def is_limited(self) -> bool:
        """Tell whether the connection has any limit, or trades in lots."""
        finite = np.isfinite(self.export_limit_mw).any() or np.isfinite(self.import_limit_mw).any()
        return bool(finite) or self.lot_mw is not None

    @property
    def is_islanded(self) -> Booleans:
        """Intervals in which nothing may flow either way: reserve then serves the meter's own load."""
        islanded: Booleans = (self.export_limit_mw == 0) & (self.import_limit_mw == 0)
        return islanded


@dataclass(frozen=True)
class Instance:
    """A request in arrays: T intervals of `hours` each, units, meters, rows.

    `buy` and `sell` are prices per MWh, T values. With `settles_fleet` one settlement covers all meters, against
    `fleet`'s position. Fixed loads are no units: their power is in the meters' `load_mw`.
    """

    calendar: Calendar
    hours: float
    buy: Floats
    sell: Floats
    settles_fleet: bool
    units: tuple[Unit, ...]
    meters: tuple[Meter, ...]
    fleet: Meter
    rows: tuple[CommitmentRow, ...]
    products: tuple[Product, ...]
    relative_gap: float
    absolute_gap: float

    @property
    def intervals(self) -> int:
        """Number of intervals T."""
        return len(self.buy)

    @property
    def has_one_price(self) -> bool:
        """Tell whether buying and selling cost the same everywhere."""
        return bool((self.buy == self.sell).all())

    @property
    def connections(self) -> tuple[Meter, ...]:
        """Every meter, and the fleet as one."""
        return (*self.meters, self.fleet)

    @property
    def stores(self) -> tuple[Store, ...]:
        """The units that are stores."""
        return tuple(unit for unit in self.units if isinstance(unit, Store))

    def part(self, meters: Iterable[Meter], rows: Iterable[CommitmentRow]) -> "Instance":
        """Take some meters with their units and rows as an instance of their own, units numbered anew."""
        kept = tuple(meters)
        numbers = [unit for meter in kept for unit in meter.units]
        renumbered = {old: new for new, old in enumerate(numbers)}
        kept = tuple(replace(meter, units=tuple(renumbered[u] for u in meter.units)) for meter in kept)
        own_rows = tuple(replace(row, units=tuple(renumbered[u] for u in row.units)) for row in rows)
        load: Floats = sum((meter.load_mw for meter in kept), start=np.zeros(self.intervals))
        fleet = replace(self.fleet, units=tuple(range(len(numbers))), load_mw=load)
        units = tuple(self.units[number] for number in numbers)
        return replace(self, units=units, meters=kept, fleet=fleet, rows=own_rows)


def instance_of(job: OneWindow) -> Instance:
    """Index a validated job whose fleet and window are inline."""
    fleet, window = job.fleet, job.window
    if fleet is None or window is None:
        raise ValueError("the job must carry its fleet and its window inline")
    calendar = Calendar.of(window)
    available = availability_of(job, calendar)
    units = tuple(_units(job, fleet, calendar, available))
    numbers = {unit.id: number for number, unit in enumerate(units)}
    loads = {
        asset.id: series(job.forecasts[asset.id], calendar.count) * _share(available, asset.id, calendar.count)
        for asset in fleet.assets
        if isinstance(asset, FixedLoad)
    }

    def drawn(assets: Iterable[str]) -> Floats:
        return _load(assets, units, numbers, loads, calendar.count)

    meters = tuple(_meters(job, fleet, numbers, drawn, calendar.count))
    buy, sell = _prices(window, calendar.count)
    return Instance(
        calendar=calendar,
        hours=calendar.hours,
        buy=buy,
        sell=sell,
        settles_fleet=window.settled_at == "fleet",
        units=units,
        meters=meters,
        fleet=_fleet_meter(job, fleet, meters, calendar.count),
        rows=tuple(rows_of_job(Ground(job, fleet, calendar, units, numbers, drawn, loads))),
        products=products_of_window(window, calendar),
        relative_gap=job.relative_gap,
        absolute_gap=job.absolute_gap,
    )


def _units(job: OneWindow, fleet: Fleet, calendar: Calendar, available: dict[str, Availability]) -> Iterator[Unit]:
    for asset in fleet.assets:
        left = available.get(asset.id)
        if isinstance(asset, Storage):
            yield store_of(job, asset, calendar, left)
        elif isinstance(asset, Generator):
            yield generator_of(job, asset, calendar, left)
        elif isinstance(asset, Renewable):
            yield renewable_of(job, asset, calendar, left)
        elif isinstance(asset, FlexibleLoad):
            yield flexible_load_of(job, asset, calendar, left)


def _share(available: dict[str, Availability], asset: str, count: int) -> Floats:
    return available[asset].charge if asset in available else np.ones(count)


def _prices(window: Window, count: int) -> tuple[Floats, Floats]:
    if window.price_per_mwh is not None:
        price = series(window.price_per_mwh, count)
        return price, price
    if window.buy_price_per_mwh is None or window.sell_price_per_mwh is None:
        raise ValueError("a window has one price, or a price to buy and one to sell")
    return series(window.buy_price_per_mwh, count), series(window.sell_price_per_mwh, count)


def _limit(job: OneWindow, meter: str, member: str, own: float | None, count: int) -> Floats:
    todays = job.limits.get(meter)
    value = getattr(todays, member) if todays is not None else None
    if value is None:
        value = np.inf if own is None else own
    return series(value, count)


def _meters(
    job: OneWindow, fleet: Fleet, numbers: dict[str, int], drawn: Callable[[Iterable[str]], Floats], count: int
) -> Iterator[Meter]:
    members: dict[str, list[str]] = {site.id: [] for site in fleet.sites}
    for asset in fleet.assets:
        members.setdefault(asset.site or asset.id, []).append(asset.id)
    sites = {site.id: site for site in fleet.sites}
    for meter, assets in members.items():
        site = sites.get(meter)
        counted = job.counted_before.sites.get(meter)
        yield Meter(
            id=meter,
            units=tuple(numbers[asset] for asset in assets if asset in numbers),
            load_mw=drawn(assets),
            lot_mw=site.lot_mw if site else None,
            export_limit_mw=_limit(job, meter, "export_limit_mw", site.export_limit_mw if site else None, count),
            import_limit_mw=_limit(job, meter, "import_limit_mw", site.import_limit_mw if site else None, count),
            position_mw=series(job.positions.get(meter, 0.0), count),
            export_fee_per_mwh=site.export_fee_per_mwh if site else 0.0,
            import_fee_per_mwh=site.import_fee_per_mwh if site else 0.0,
            peak_import_charge_per_mw=site.peak_import_charge_per_mw if site else 0.0,
            peak_so_far_mw=counted.peak_import_mw if counted else 0.0,
        )


def _load(
    assets: Iterable[str], units: tuple[Unit, ...], numbers: dict[str, int], loads: dict[str, Floats], count: int
) -> Floats:
    """Sum what fixed loads and standby loads of these assets draw, MW per interval."""
    drawn = np.zeros(count)
    for asset in assets:
        if asset in loads:
            drawn += loads[asset]
        elif asset in numbers:
            drawn += units[numbers[asset]].standby_load_mw
    return drawn


def _fleet_meter(job: OneWindow, fleet: Fleet, meters: tuple[Meter, ...], count: int) -> Meter:
    load: Floats = sum((meter.load_mw for meter in meters), start=np.zeros(count))
    return Meter(
        id="fleet",
        units=tuple(unit for meter in meters for unit in meter.units),
        load_mw=load,
        lot_mw=fleet.lot_mw,
        export_limit_mw=_limit(job, "fleet", "export_limit_mw", fleet.export_limit_mw, count),
        import_limit_mw=_limit(job, "fleet", "import_limit_mw", fleet.import_limit_mw, count),
        position_mw=series(job.positions.get("fleet", 0.0), count),
    )
