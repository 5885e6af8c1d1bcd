"""Levers of planned outages: shorter at either end, later as a whole, or partial. Forced ones are facts."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from datetime import datetime
from zoneinfo import ZoneInfo

from schemas.job import Outage, ScheduleJob
from workers.planning.availability import fractions
from workers.planning.diagnosis.elements import Element
from workers.planning.diagnosis.levers.lever import Grid, Lever, Values
from workers.planning.diagnosis.scope import Scope

Change = dict[str, float | datetime | None]
"""New values of an outage's members, by their names on the wire."""

FIELDS = {"from": "from_"}


@dataclass(frozen=True)
class _Planned:
    """A planned outage in its scope."""

    scope: Scope
    element: Element
    outage: Outage
    place: int

    @property
    def zone(self) -> ZoneInfo:
        return ZoneInfo(self.scope.instance.calendar.timezone)

    @property
    def name(self) -> str:
        return f"planned outage of {self.outage.asset}"

    def clock(self, instant: datetime | None) -> str:
        """Write an instant as local time."""
        return "further notice" if instant is None else f"{instant.astimezone(self.zone):%Y-%m-%d %H:%M}"

    def instant(self, instant: datetime | None) -> str:
        """Write an instant as answers do, with the offset of the window's timezone."""
        return "further notice" if instant is None else instant.astimezone(self.zone).isoformat()

    def lever(
        self,
        member: str,
        unit: str,
        steps: int,
        change: Callable[[int], Change],
        shown: Callable[[int], float | str],
        words: Callable[[int], str],
    ) -> Lever:
        """Give a lever from what it changes."""

        def apply(job: ScheduleJob, step: int) -> ScheduleJob:
            outages = list(job.outages)
            fields = {FIELDS.get(name, name): value for name, value in change(step).items()}
            outages[self.place] = outages[self.place].model_copy(update=fields)
            return job.model_copy(update={"outages": outages})

        def values(step: int) -> Values:
            place = self.element.pointer
            return {f"{place}/{name}": self._on_the_wire(value) for name, value in change(step).items()}

        covers = frozenset({self.element})
        pointer = f"{self.element.pointer}/{member}"
        return Lever("planned_outages", pointer, unit, steps, covers, apply, values, shown, words)

    def _on_the_wire(self, value: float | datetime | None) -> float | str | None:
        return value.astimezone(self.zone).isoformat() if isinstance(value, datetime) else value


def of_outage(scope: Scope, element: Element) -> Iterator[Lever]:
    """Give the levers of an outage; none for a forced one."""
    place = scope.outages.index(element.number)
    planned = _Planned(scope, element, scope.job.outages[place], place)
    if planned.outage.kind == "planned":
        yield _ending_sooner(planned)
        yield _beginning_later(planned)
        yield from _as_long_but_later(planned)
        yield _partial(planned)


def _ending_sooner(planned: _Planned) -> Lever:
    outage, calendar = planned.outage, planned.scope.instance.calendar
    hit = calendar.touching(outage.from_, outage.to)

    def until(step: int) -> datetime | None:
        return calendar.start + (hit.stop - step) * calendar.interval if step else outage.to

    def words(step: int) -> str:
        return f"{planned.name}: end at {planned.clock(until(step))} instead of {planned.clock(outage.to)}"

    return planned.lever(
        "to", "instant", len(hit) - 1, lambda k: {"to": until(k)}, lambda k: planned.instant(until(k)), words
    )


def _beginning_later(planned: _Planned) -> Lever:
    outage, calendar = planned.outage, planned.scope.instance.calendar
    hit = calendar.touching(outage.from_, outage.to)

    def begin(step: int) -> datetime:
        return calendar.start + (hit.start + step) * calendar.interval if step else outage.from_

    def words(step: int) -> str:
        return f"{planned.name}: begin at {planned.clock(begin(step))} instead of {planned.clock(outage.from_)}"

    return planned.lever(
        "from", "instant", len(hit) - 1, lambda k: {"from": begin(k)}, lambda k: planned.instant(begin(k)), words
    )


def _as_long_but_later(planned: _Planned) -> Iterator[Lever]:
    outage, calendar = planned.outage, planned.scope.instance.calendar
    if outage.to is None:
        return
    length = outage.to - outage.from_

    def begin(step: int) -> datetime:
        return outage.from_ + step * calendar.interval

    def words(step: int) -> str:
        moved = f"{planned.clock(begin(step))} to {planned.clock(begin(step) + length)}"
        return f"{planned.name}: move it to {moved}, as long as planned, from {planned.clock(outage.from_)}"

    yield planned.lever(
        "from",
        "instant, as long",
        calendar.count - calendar.touching(outage.from_, outage.to).start,
        lambda k: {"from": begin(k), "to": begin(k) + length},
        lambda k: planned.instant(begin(k)),
        words,
    )


def _partial(planned: _Planned) -> Lever:
    """Leave more: every fraction that the outage gives is raised to the same, short of no outage at all."""
    outage = planned.outage
    names = ("available_charge_fraction", "available_discharge_fraction")
    left = dict(zip(names, fractions(outage), strict=True))
    one_way = {name: left[name] for name in names if getattr(outage, name) is not None}
    present = one_way or {"available_fraction": left[names[0]]}
    least = min(present.values())
    grid = Grid(least, max(least, 0.99))

    def change(step: int) -> Change:
        return {name: max(value, grid.at(step)) for name, value in present.items()}

    def words(step: int) -> str:
        return f"{planned.name}: leave {grid.at(step):g} of its power instead of {least:g}"

    return planned.lever(next(iter(present)), "fraction", grid.steps, change, grid.at, words)
