"""What may be changed to cure a request, step by step: by how much, in what the caller wrote, and in words.

A lever has steps: 0 is the request as it is, each further one asks for less (or grants more) by what a person would
write: one interval, 0.01 MW, 0.01 MWh, 0.01 of a fraction. A step is a change of a job, and the same change as values
at pointers of the request.
"""

from collections.abc import Callable, Collection, Iterator
from dataclasses import dataclass
from datetime import datetime
from math import ceil, floor
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np

from schemas.commitments import (
    Commitment,
    EnergyAtLeast,
    EnergyAtMost,
    FirmDelivery,
    HoursAtLeast,
    HoursAtMost,
    ReserveHolding,
)
from schemas.job import Lever as LeverName
from schemas.job import Outage, ScheduleJob, Target, TodaysLimits
from workers.planning.availability import fractions
from workers.planning.diagnosis.elements import SIDES, Element
from workers.planning.diagnosis.scope import Scope
from workers.planning.instance import Instance
from workers.planning.store import Store

GRAIN = 0.01
"""Step of powers, energies and fractions: MW, MWh, share."""

Values = dict[str, Any]
"""Values by pointer into the request; None takes a member away."""


@dataclass(frozen=True)
class Lever:
    """One thing that can be moved; `steps` of it there are.

    `covers` are the elements it eases; `apply` changes a job of the scope to a step, `values` are the same change to
    the request, `shown` what stands there, in `unit`, `words` says it. `pointer` is where.
    """

    name: LeverName
    pointer: str
    unit: str
    steps: int
    covers: frozenset[Element]
    apply: Callable[[ScheduleJob, int], ScheduleJob]
    values: Callable[[int], Values]
    shown: Callable[[int], float | str]
    words: Callable[[int], str]


def levers_of(scope: Scope, elements: Collection[Element]) -> list[Lever]:
    """List the levers that the job allows and that ease any of these elements."""
    allowed = set(scope.job.levers)
    found: list[Lever] = []
    if "commitments" in allowed:
        for number in sorted({element.number for element in elements if element.kind == "row"}):
            found += _commitment_levers(scope, number)
    for element in elements:
        if element.kind == "target" and "targets" in allowed:
            found.append(_target(scope, element))
        elif element.kind == "outage" and "planned_outages" in allowed:
            found += _outage_levers(scope, element)
        elif element.kind == "initial" and "initial_energy" in allowed:
            found += _initial_levers(scope, element)
        elif element.kind == "limit" and "limits" in allowed:
            found.append(_limit(scope, element))
    return [lever for lever in found if lever.steps > 0]


def grid_below(value: float, step: float, steps: int) -> float:
    """Give the `steps`-th multiple of 0.01 (or of a step) below a value, the value itself at 0."""
    return value if steps == 0 else round((ceil(value / step - 1e-9) - steps) * step, 9)


def grid_above(value: float, step: float, steps: int) -> float:
    """Give the `steps`-th multiple of a step above a value, the value itself at 0."""
    return value if steps == 0 else round((floor(value / step + 1e-9) + steps) * step, 9)


def _commitment_levers(scope: Scope, number: int) -> Iterator[Lever]:
    """Give the levers of a commitment; all its rows move together."""
    place = scope.commitments.index(number)
    commitment = scope.job.commitments[place]
    hours = scope.instance.hours
    pointer = f"/commitments/{number}"
    covers = frozenset(element for element in scope.elements if element.kind == "row" and element.number == number)

    def lever(
        member: str, unit: str, steps: int, at: Callable[[int], Any], shown: Callable[[int], float], what: str
    ) -> Lever:
        def apply(job: ScheduleJob, step: int) -> ScheduleJob:
            commitments = list(job.commitments)
            commitments[place] = _with(commitments[place], member, at(step))
            return job.model_copy(update={"commitments": commitments})

        def words(step: int) -> str:
            return f"{commitment.id}: {what} {shown(step):g} {unit} instead of {shown(0):g}"

        where = f"{pointer}/{member}"
        return Lever("commitments", where, unit, steps, covers, apply, lambda k: {where: at(k)}, shown, words)

    if isinstance(commitment, HoursAtLeast):
        asked = commitment.hours
        fewer = lambda k: grid_below(asked, hours, k)  # noqa: E731
        yield lever("hours", "h", ceil(asked / hours - 1e-9), fewer, fewer, "ask for")
        member, now, unit = _threshold(commitment)
        lower = lambda k: grid_below(now, GRAIN, k)  # noqa: E731
        yield lever(member, unit, ceil(now / GRAIN - 1e-9) - 1, lower, lower, "count from")
    elif isinstance(commitment, HoursAtMost):
        asked = commitment.hours
        more = lambda k: grid_above(asked, hours, k)  # noqa: E731
        yield lever("hours", "h", scope.instance.intervals - floor(asked / hours + 1e-9), more, more, "allow")
        member, now, unit = _threshold(commitment)
        higher = lambda k: min(grid_above(now, GRAIN, k), 1.0 if unit == "of rated power" else np.inf)  # noqa: E731
        steps = _steps_to(
            1.0 if unit == "of rated power" else _most_power(scope.instance) + commitment.headroom_mw, now
        )
        yield lever(member, unit, steps, higher, higher, "count from above")
    elif isinstance(commitment, EnergyAtLeast):
        energy = commitment.energy_mwh
        less = lambda k: grid_below(energy, GRAIN, k)  # noqa: E731
        yield lever("energy_mwh", "MWh", ceil(energy / GRAIN - 1e-9), less, less, "ask for")
    elif isinstance(commitment, EnergyAtMost):
        energy = commitment.energy_mwh
        more = lambda k: grid_above(energy, GRAIN, k)  # noqa: E731
        most = _most_power(scope.instance) * hours * scope.instance.intervals
        yield lever("energy_mwh", "MWh", _steps_to(most, energy), more, more, "allow")
    elif isinstance(commitment, FirmDelivery | ReserveHolding):
        power = commitment.power_mw
        top = float(np.max(power))
        cap = lambda k: grid_below(top, GRAIN, k)  # noqa: E731
        yield lever(
            "power_mw", "MW", ceil(top / GRAIN - 1e-9), lambda k: _capped(power, cap(k)), cap, "ask for at most"
        )


def _with(commitment: Commitment, member: str, value: Any) -> Commitment:
    first, _, second = member.partition("/")
    if second:
        value = getattr(commitment, first).model_copy(update={second: value})
    return commitment.model_copy(update={first: value})


def _threshold(commitment: HoursAtLeast | HoursAtMost) -> tuple[str, float, str]:
    if commitment.threshold.mw is not None:
        return "threshold/mw", commitment.threshold.mw, "MW"
    return "threshold/fraction_of_rated", commitment.threshold.fraction_of_rated or 0.0, "of rated power"


def _capped(power_mw: float | list[float], most: float) -> float | list[float]:
    return [min(power, most) for power in power_mw] if isinstance(power_mw, list) else min(power_mw, most)


def _steps_to(most: float, now: float) -> int:
    return max(0, min(ceil(most / GRAIN) - floor(now / GRAIN + 1e-9), 10**9))


def _most_power(instance: Instance) -> float:
    """Give more power than could flow anywhere in the scope, MW."""
    flow = sum((unit.most_out_mw + unit.most_in_mw for unit in instance.units), np.abs(instance.fleet.load_mw))
    return float(np.max(flow)) + float(max(np.max(np.abs(meter.load_mw)) for meter in instance.meters))


def _store(scope: Scope, asset: str) -> Store:
    return next(store for store in scope.instance.stores if store.id == asset)


def _target(scope: Scope, element: Element) -> Lever:
    """Give the lever of a final target: a lower one."""
    asset, now = element.subject, _store(scope, element.subject).final_floor_mwh
    lower = lambda k: grid_below(now, GRAIN, k)  # noqa: E731
    return Lever(
        "targets",
        element.pointer,
        "MWh",
        ceil(now / GRAIN - 1e-9),
        frozenset({element}),
        lambda job, k: _with_target(job, asset, lower(k)),
        lambda k: {element.pointer: lower(k)},
        lower,
        lambda k: f"{asset}: end with {lower(k):g} MWh instead of {now:.6g}",
    )


def _with_target(job: ScheduleJob, asset: str, final_mwh: float) -> ScheduleJob:
    target = job.targets.get(asset, Target()).model_copy(update={"final_stored_mwh": final_mwh})
    return job.model_copy(update={"targets": {**job.targets, asset: target}})


def _initial_levers(scope: Scope, element: Element) -> Iterator[Lever]:
    """Give the levers of initial energy: more of it, or less; the final target stays the number it was."""
    asset, store = element.subject, _store(scope, element.subject)
    state = f"/initial/{asset}"
    target = f"/targets/{asset}/final_stored_mwh"
    given = scope.job.targets.get(asset)
    keeps_target = given is None or given.final_stored_mwh is None
    free = store.with_any_initial_energy(next(a for a in scope.job.fleet.assets if a.id == asset))  # type: ignore[union-attr, arg-type]

    def lever(at: Callable[[int], float], steps: int, what: str) -> Lever:
        def values(step: int) -> Values:
            changed: Values = {f"{state}/stored_mwh": at(step), f"{state}/state_of_charge_percent": None}
            return changed | ({target: store.final_floor_mwh} if keeps_target else {})

        def apply(job: ScheduleJob, step: int) -> ScheduleJob:
            initial = job.initial[asset].model_copy(update={"stored_mwh": at(step), "state_of_charge_percent": None})
            changed = job.model_copy(update={"initial": {**job.initial, asset: initial}})
            return _with_target(changed, asset, store.final_floor_mwh) if keeps_target else changed

        return Lever(
            "initial_energy",
            f"{state}/stored_mwh",
            "MWh",
            steps if asset in scope.job.initial else 0,
            frozenset({element}),
            apply,
            values,
            at,
            lambda k: f"{asset}: start with {at(k):g} MWh {what} of {store.initial_mwh:.6g}",
        )

    now = store.initial_mwh
    highest, lowest = free.most_initial_mwh, free.least_initial_mwh
    yield lever(lambda k: min(grid_above(now, GRAIN, k), highest), _steps_to(highest, now), "instead")
    below = max(0, ceil(now / GRAIN - 1e-9) - floor(lowest / GRAIN + 1e-9))
    yield lever(lambda k: max(grid_below(now, GRAIN, k), lowest), below, "instead")


def _limit(scope: Scope, element: Element) -> Lever:
    """Give the lever of a connection's limit: a higher one, today, in every interval that has less."""
    meter, side = element.subject, element.name
    instance = scope.instance
    known = instance.fleet if meter == "fleet" else next(m for m in instance.meters if m.id == meter)
    limit = getattr(known, side)
    least = float(np.min(limit))
    is_one = bool((limit == least).all())
    pointer = f"/limits/{meter}/{side}"

    def shown(step: int) -> float:
        return grid_above(least, GRAIN, step)

    def at(step: int) -> float | list[float]:
        raised = np.maximum(limit, shown(step))
        return shown(step) if is_one else [float(value) for value in raised]

    def apply(job: ScheduleJob, step: int) -> ScheduleJob:
        todays = job.limits.get(meter, TodaysLimits()).model_copy(update={side: at(step)})
        return job.model_copy(update={"limits": {**job.limits, meter: todays}})

    def words(step: int) -> str:
        return (
            f"{meter}: {SIDES[side]} of {shown(step):g} MW instead of {least:g}; a connection's limit is for its "
            "network operator to raise"
        )

    steps = _steps_to(_most_power(instance), least)
    return Lever("limits", pointer, "MW", steps, frozenset({element}), apply, lambda k: {pointer: at(k)}, shown, words)


def _outage_levers(scope: Scope, element: Element) -> Iterator[Lever]:
    """Give the levers of a planned outage: shorter at either end, later as a whole, or partial."""
    place = scope.outages.index(element.number)
    outage = scope.job.outages[place]
    if outage.kind != "planned":
        return
    calendar = scope.instance.calendar
    hit = calendar.touching(outage.from_, outage.to)
    zone = ZoneInfo(calendar.timezone)
    begin = calendar.start + hit.start * calendar.interval
    end = calendar.start + hit.stop * calendar.interval
    name = f"planned outage of {outage.asset}"

    def clock(instant: datetime | None) -> str:
        return "further notice" if instant is None else f"{instant.astimezone(zone):%Y-%m-%d %H:%M}"

    def lever(
        member: str,
        steps: int,
        at: Callable[[int], dict[str, Any]],
        shown: Callable[[int], float | str],
        words: Callable[[int], str],
        unit: str = "local time",
    ) -> Lever:
        def apply(job: ScheduleJob, step: int) -> ScheduleJob:
            outages = list(job.outages)
            changed = {_FIELDS.get(key, key): value for key, value in at(step).items()}
            outages[place] = outages[place].model_copy(update=changed)
            return job.model_copy(update={"outages": outages})

        def values(step: int) -> Values:
            return {
                f"{element.pointer}/{key}": value.astimezone(zone).isoformat() if isinstance(value, datetime) else value
                for key, value in at(step).items()
            }

        where = f"{element.pointer}/{member}"
        return Lever("planned_outages", where, unit, steps, frozenset({element}), apply, values, shown, words)

    length = len(hit)

    def sooner(step: int) -> datetime | None:
        return end - step * calendar.interval if step else outage.to

    def later(step: int) -> datetime:
        return begin + step * calendar.interval if step else outage.from_

    yield lever(
        "to",
        length - 1,
        lambda k: {"to": sooner(k)},
        lambda k: clock(sooner(k)),
        lambda k: f"{name}: end at {clock(sooner(k))} instead of {clock(outage.to)}",
    )
    yield lever(
        "from",
        length - 1,
        lambda k: {"from": later(k)},
        lambda k: clock(later(k)),
        lambda k: f"{name}: begin at {clock(later(k))} instead of {clock(outage.from_)}",
    )
    if outage.to is not None:
        until = outage.to

        def moved(step: int) -> dict[str, Any]:
            shift = step * calendar.interval
            return {"from": outage.from_ + shift, "to": until + shift}

        yield lever(
            "from",
            calendar.count - hit.start,
            moved,
            lambda k: clock(moved(k)["from"]),
            lambda k: f"{name}: move it to {clock(moved(k)['from'])}, as long as planned, from {clock(outage.from_)}",
        )
    yield from _partial(outage, lever, name)


_FIELDS = {"from": "from_"}


def _partial(outage: Outage, lever: Callable[..., Lever], name: str) -> Iterator[Lever]:
    """Give the lever of an outage that leaves more: every fraction it has is raised to the same."""
    left = dict(zip(("available_charge_fraction", "available_discharge_fraction"), fractions(outage), strict=True))
    one_way = [key for key in left if getattr(outage, key) is not None]
    members = one_way or ["available_fraction"]
    present = (
        {key: left[key] for key in one_way} if one_way else {"available_fraction": left["available_charge_fraction"]}
    )
    least = min(present.values())

    def shown(step: int) -> float:
        return grid_above(least, GRAIN, step)

    yield lever(
        members[0],
        max(0, 99 - floor(least / GRAIN + 1e-9)),
        lambda k: {key: max(value, shown(k)) if k else value for key, value in present.items()},
        shown,
        lambda k: f"{name}: leave {shown(k):g} of its power instead of {least:g}",
        "fraction",
    )
