"""Replay one renewable: up to its forecast, or exactly that where it cannot be curtailed.

0 <= p[t] <= forecast[t] * available_fraction[t];  not curtailable:  p[t] = that
cost = sum of cost_per_mwh * h * p[t]
"""

from collections.abc import Sequence
from math import fsum

from schemas.fleet import Renewable
from schemas.schedule import AssetSchedule, AssetTotals
from workers.planning.audit.availability import read_availability
from workers.planning.audit.case import Case
from workers.planning.audit.clock import whole_series
from workers.planning.audit.ledger import at, figure, pointer
from workers.planning.audit.reserve import read_reserve
from workers.planning.audit.set_points import Decision, read_powers


def replay_renewable(case: Case, place: int, plant: Renewable, decision: Decision | None) -> AssetSchedule:
    """Return a renewable's schedule; raise ValueError when the job has no forecast for it."""
    if plant.id not in case.job.forecasts:
        raise ValueError(f"the forecast of {plant.id} is not given")
    most = whole_series(case.job.forecasts[plant.id], case.clock.count, f"the forecast of {plant.id}")
    available = read_availability(case.outages.get(plant.id, ()), case.clock)
    if available is not None:
        most = [mw * fraction for mw, fraction in zip(most, available.discharge.fraction, strict=True)]
    instead = [0.0] * case.clock.count if plant.curtailable else most
    power = read_powers(plant.id, pointer("fleet", "assets", place), decision, instead, case.ledger)
    read_reserve(case, place, plant, decision)
    _check_power(case, place, plant, power, most)
    cost = plant.cost_per_mwh * case.clock.hours * fsum(power) if plant.cost_per_mwh else 0.0
    return AssetSchedule(id=plant.id, power_mw=power, totals=AssetTotals(fuel_cost=cost))


def _check_power(case: Case, place: int, plant: Renewable, power: Sequence[float], most: Sequence[float]) -> None:
    def above(t: int, excess: float) -> None:
        text = f"{running(t)}, {figure(excess)} MW above the {figure(most[t])} MW there are"
        where = pointer("forecasts", plant.id)
        case.ledger.report("forecast", where, excess, "MW", text, asset=plant.id, interval=t)

    def below(t: int, missing: float) -> None:
        asset = pointer("fleet", "assets", place)
        if plant.curtailable:
            case.ledger.report("draws_power", asset, missing, "MW", running(t), asset=plant.id, interval=t)
            return
        text = f"{running(t)}, {figure(missing)} MW less than there are: it cannot be curtailed"
        where = f"{asset}/curtailable"
        case.ledger.report("not_curtailable", where, missing, "MW", text, asset=plant.id, interval=t)

    def running(t: int) -> str:
        return f"{plant.id} gives {figure(power[t])} MW from {at(case.clock.starts[t])}"

    case.ledger.at_most(power, most, above)
    least = 0.0 if plant.curtailable else [-mw for mw in most]
    case.ledger.at_most([-mw for mw in power], least, below)
