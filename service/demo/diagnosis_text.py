"""Why a request cannot be met, for a person to read."""

from collections.abc import Iterator
from datetime import datetime
from zoneinfo import ZoneInfo

from schemas.diagnosis import Diagnosis
from schemas.job import Outage, ScheduleJob


def outages_text(job: ScheduleJob) -> Iterator[str]:
    """Write who is out, and until when."""
    zone = ZoneInfo(job.window.timezone if job.window else "UTC")
    yield from (f"- {_outage(outage, zone)}" for outage in job.outages)


def _outage(outage: Outage, zone: ZoneInfo) -> str:
    until = "until further notice" if outage.to is None else f"until {_clock(outage.to, zone)}"
    return f"{outage.asset}: {outage.kind} outage from {_clock(outage.from_, zone)} {until}"


def _clock(instant: datetime, zone: ZoneInfo) -> str:
    return f"{instant.astimezone(zone):%H:%M}"


def diagnosis_text(diagnosis: Diagnosis) -> Iterator[str]:
    """Write the sentence that says why, then the elements that cannot hold together, each with its place."""
    yield f"It cannot be met, proven: {diagnosis.summary}"
    for conflict in diagnosis.conflicts:
        yield _introduction(len(conflict.members), is_irreducible=conflict.irreducible)
        yield from (f"- {member.text} (at {member.pointer} of the request)" for member in conflict.members)


def _introduction(count: int, *, is_irreducible: bool) -> str:
    if count == 1:
        return "What cannot hold with the plant as it is:"
    return "What cannot hold together, none to spare:" if is_irreducible else "What cannot hold together, among it:"
