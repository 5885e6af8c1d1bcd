"""Why a request cannot be met, and how far it can, for a person to read."""

from collections.abc import Iterator
from datetime import datetime
from zoneinfo import ZoneInfo

from schemas.diagnosis import Attainable, Conflict, Diagnosis, NearestSchedule
from schemas.job import Outage, ScheduleJob

UNITS = {"hours": "h", "mwh": "MWh", "mw_hours": "MW h"}
"""What ends the names of a row's figures, and the unit that it stands for."""


def outages_text(job: ScheduleJob) -> Iterator[str]:
    """Write who is out, and until when; a day is named where it is not the window's first."""
    yield from (f"- {_outage(job, outage)}" for outage in job.outages)


def _outage(job: ScheduleJob, outage: Outage) -> str:
    until = "until further notice" if outage.to is None else f"until {_clock(job, outage.to)}"
    return f"{outage.asset}: {outage.kind} outage from {_clock(job, outage.from_)} {until}"


def _clock(job: ScheduleJob, instant: datetime) -> str:
    if job.window is None:
        raise ValueError("a window inline is expected")
    zone = ZoneInfo(job.window.timezone)
    local = instant.astimezone(zone)
    day = "" if local.date() == job.window.start.astimezone(zone).date() else f"{local:%a %Y-%m-%d} "
    return f"{day}{local:%H:%M}"


def conflicts_text(diagnosis: Diagnosis) -> Iterator[str]:
    """Write for each conflict what cannot hold together, each element with its place in the request."""
    for conflict in diagnosis.conflicts:
        yield _introduction(conflict)
        yield from (f"- {member.text} (at {member.pointer})" for member in conflict.members)


def _introduction(conflict: Conflict) -> str:
    count = len(conflict.members)
    if not conflict.irreducible:
        return "Among these is what cannot hold together; time did not suffice to narrow it down:"
    if count == 1:
        return "This cannot hold with the plant as it is, whatever else is left out:"
    return f"These {count} cannot hold together; leave out any one of them, and the others can:"


def attainable_text(diagnosis: Diagnosis) -> Iterator[str]:
    """Write a line for each row that was looked at: what it asks, and how far it can be met with the others kept."""
    yield f"{'commitment':16} {'by':12} {'day':10} {'asked':>12} {'in reach':>12} {'missing':>12}"
    for row in diagnosis.attainable:
        asked, reached, unit = _figures(row)
        cells = "".join(f" {f'{amount:.6g} {unit}':>12}" for amount in (asked, reached, abs(asked - reached)))
        yield f"{row.commitment:16} {row.asset or '-':12} {row.day or '-':10}{cells}"


def without_text(diagnosis: Diagnosis) -> Iterator[str]:
    """Say for which figures something else had to be left out, since it cannot be met whatever the row asks."""
    for row in diagnosis.attainable:
        if row.left_out:
            yield f"- {row.commitment}: that far only without {', '.join(row.left_out)}, which cannot be met anyway."


def _figures(row: Attainable) -> tuple[float, float, str]:
    given = row.model_dump()
    for name, unit in UNITS.items():
        if given[f"required_{name}"] is not None:
            return given[f"required_{name}"], given[f"attainable_{name}"], unit
    raise ValueError(f"{row.commitment} comes without a figure")


def nearest_text(nearest: NearestSchedule, currency: str) -> Iterator[str]:
    """Write what the schedule nearest to the request would miss, and what it would earn."""
    yield from (f"- {short.text} (at {short.pointer})" for short in nearest.shortfalls)
    yield (
        f"All else that binds is kept, and {nearest.margin:.2f} {currency} earned, before what missing that costs. It "
        "does not meet the request, and is given only to who asks for it (?accept_shortfall=true)."
    )
