"""Replay one fixed load: it draws its forecast, and what an outage leaves of it.

p[t] = -forecast[t] * available_fraction[t]
"""

from collections.abc import Sequence

from schemas.fleet import FixedLoad
from schemas.schedule import AssetSchedule
from workers.planning.audit.availability import read_availability
from workers.planning.audit.case import Case
from workers.planning.audit.clock import whole_series
from workers.planning.audit.ledger import at, figure, pointer
from workers.planning.audit.reserve import read_reserve
from workers.planning.audit.set_points import Decision, read_powers


def replay_fixed_load(case: Case, place: int, load: FixedLoad, decision: Decision | None) -> AssetSchedule:
    """Return a load's schedule: its forecast where nothing was decided; what was decided must be the forecast.

    Raises ValueError when the job has no forecast for it.
    """
    if load.id not in case.job.forecasts:
        raise ValueError(f"the forecast of {load.id} is not given")
    draw = whole_series(case.job.forecasts[load.id], case.clock.count, f"the forecast of {load.id}")
    available = read_availability(case.outages.get(load.id, ()), case.clock)
    if available is not None:
        draw = [mw * fraction for mw, fraction in zip(draw, available.charge.fraction, strict=True)]
    # 0.0 - mw and not -mw: nothing drawn is 0, not -0.
    forecast = [0.0 - mw for mw in draw]
    if decision is None:
        return AssetSchedule(id=load.id, power_mw=forecast)
    power = read_powers(load.id, pointer("fleet", "assets", place), decision, forecast, case.ledger)
    read_reserve(case, place, load, decision)
    _check_forecast(case, load, power, draw)
    return AssetSchedule(id=load.id, power_mw=power)


def _check_forecast(case: Case, load: FixedLoad, power: Sequence[float], draw: Sequence[float]) -> None:
    for t, (mw, due) in enumerate(zip(power, draw, strict=True)):
        gap = abs(mw + due)
        if not case.ledger.is_held(gap, due):
            text = f"{load.id} draws {figure(-mw)} MW from {at(case.clock.starts[t])}, its forecast is {figure(due)} MW"
            where = pointer("forecasts", load.id)
            case.ledger.report("forecast", where, gap, "MW", text, asset=load.id, interval=t)
