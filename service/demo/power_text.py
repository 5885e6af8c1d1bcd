"""Power and stored energy of a schedule, for a person to read: one line an asset, one line a meter."""

from collections.abc import Collection, Iterator
from math import inf

from schemas.fleet import Site, Storage
from schemas.job import ScheduleJob
from schemas.schedule import AssetSchedule, Schedule
from service.demo import day_strip

_PEAK_INTERVALS = 8
SHOWN_MW = 5e-4


def assets_text(job: ScheduleJob, schedule: Schedule, only: Collection[str] | None = None) -> Iterator[str]:
    """Write what each store does over the day, and what it holds before, during and after it; `only`: of these."""
    hours = day_strip.hours_of(schedule.interval_starts)
    yield f"{'':10} {'limit, MW':^11}  {'hour of the day':<48} {'stored, MWh':>25}"
    ruler = day_strip.ruler(schedule.interval_starts)
    yield f"{'asset':10} {'in':>5} {'out':>5}  {ruler} {'start':>7}{'least':>6}{'most':>6}{'end':>6}"
    planned = {asset.id: asset for asset in schedule.assets}
    for asset in job.fleet.assets if job.fleet else ():
        if only is not None and asset.id not in only:
            continue
        power = planned[asset.id].power_mw
        if isinstance(asset, Storage):
            drawn = day_strip.strip(power, hours, asset.discharge_limit_mw, asset.charge_limit_mw)
            limits = f"{asset.charge_limit_mw:5.1f} {asset.discharge_limit_mw:5.1f}"
            yield f"{asset.id:10} {limits}  {drawn} {_stored(job, asset, planned[asset.id])}"
        else:
            drawn = day_strip.strip(power, hours, inf, inf)
            yield f"{asset.id:10} {'-':>5} {'-':>5}  {drawn} {'load, up to':>13} {-min(power):5.2f} MW"


def moved(before: Schedule, now: Schedule) -> list[str]:
    """Return the assets whose set points differ in any interval by what a table with three decimals shows, MW."""
    power_mw = {asset.id: asset.power_mw for asset in before.assets}
    return [
        asset.id
        for asset in now.assets
        if any(abs(mw - was) >= SHOWN_MW for mw, was in zip(asset.power_mw, power_mw[asset.id], strict=True))
    ]


def _stored(job: ScheduleJob, store: Storage, planned: AssetSchedule) -> str:
    initial = job.initial[store.id]
    percent = initial.state_of_charge_percent
    given = initial.stored_mwh if percent is None else percent / 100 * store.energy_capacity_mwh
    stored = [given or 0.0, *(planned.stored_mwh or ())]
    # Round-off may leave a store a hair below empty, which would print as -0.00.
    start, least, most, end = (round(mwh, 2) + 0.0 for mwh in (stored[0], min(stored), max(stored), stored[-1]))
    return f"{start:7.2f}{least:6.2f}{most:6.2f}{end:6.2f}"


def standby_text(job: ScheduleJob) -> Iterator[str]:
    """Say which stores draw power that is not in their line but in their meter's."""
    for asset in job.fleet.assets if job.fleet else ():
        if isinstance(asset, Storage) and asset.standby_load_mw:
            yield f"- {asset.id}: {asset.standby_load_mw:g} MW on standby all day, in its meter's line, not in its own"


def meters_text(job: ScheduleJob, schedule: Schedule) -> Iterator[str]:
    """Write what passes each meter over the day, and the whole fleet's sum."""
    hours = day_strip.hours_of(schedule.interval_starts)
    step = schedule.interval.total_seconds() / 3600
    yield f"{'':10} {'limit, MW':^11}  {'hour of the day':<48} {'most, MW':>13} {'MWh':>12}"
    ruler = day_strip.ruler(schedule.interval_starts)
    yield f"{'meter':10} {'in':>5} {'out':>5}  {ruler} {'in':>7}{'out':>6} {'in':>6}{'out':>6}"
    limits: dict[str, Site] = {site.id: site for site in job.fleet.sites} if job.fleet else {}
    meters = [(meter.id, meter.power_mw, limits.get(meter.id)) for meter in schedule.sites]
    for name, power, limited in (*meters, ("all meters", schedule.fleet.power_mw, job.fleet)):
        most_in = limited.import_limit_mw if limited else None
        most_out = limited.export_limit_mw if limited else None
        drawn = day_strip.strip(power, hours, most_out or inf, most_in or inf)
        came_in, went_out = sum(max(-mw, 0.0) for mw in power) * step, sum(max(mw, 0.0) for mw in power) * step
        peaks = f"{max(-min(power), 0.0):7.2f}{max(max(power), 0.0):6.2f}"
        yield f"{name:10} {_limit(most_in)} {_limit(most_out)}  {drawn} {peaks} {came_in:6.1f}{went_out:6.1f}"


def _limit(limit_mw: float | None) -> str:
    return f"{'none':>5}" if limit_mw is None else f"{limit_mw:5.1f}"


def peak_text(job: ScheduleJob, schedule: Schedule) -> Iterator[str]:
    """Write the set points themselves for the two dearest hours of the day that follow one another."""
    prices = prices_of(job)
    count = len(schedule.interval_starts)
    first = max(range(count - _PEAK_INTERVALS + 1), key=lambda t: sum(prices[t : t + _PEAK_INTERVALS]))
    shown = range(first, first + _PEAK_INTERVALS)
    yield f"{'':16}" + "".join(f"{schedule.interval_starts[t]:%H:%M}".rjust(9) for t in shown)
    yield f"{schedule.currency + '/MWh':16}" + "".join(f"{prices[t]:9.2f}" for t in shown)
    for asset in schedule.assets:
        yield f"{asset.id:12} MW " + "".join(f"{asset.power_mw[t]:+9.3f}" for t in shown)


def prices_text(job: ScheduleJob, schedule: Schedule) -> Iterator[str]:
    """Write the mean price of each hour, twelve hours a line."""
    prices = prices_of(job)
    hours = day_strip.hours_of(schedule.interval_starts)
    for begin in range(0, len(hours), 12):
        half = hours[begin : begin + 12]
        yield f"{'hour':10}" + "".join(f"{schedule.interval_starts[hour[0]]:%H}".rjust(7) for hour in half)
        means = (sum(prices[t] for t in hour) / len(hour) for hour in half)
        yield f"{'mean price':10}" + "".join(f"{mean:7.1f}" for mean in means)


def prices_of(job: ScheduleJob) -> list[float]:
    """Return the price of each interval; the demo's window has one price for both directions."""
    window = job.window
    if window is None or not isinstance(window.price_per_mwh, list):
        raise ValueError("a window with one price for each interval is expected")
    return window.price_per_mwh
