"""What an endpoint is: its address, what it takes, what it answers. Routes and the OpenAPI document come from here."""

from collections.abc import Callable
from dataclasses import dataclass, field
from threading import BoundedSemaphore, Event
from time import monotonic
from typing import Any

from flask import Request, Response

from schemas.records import JobRecord
from service.store import DocumentStore, JobStore
from service.web.answers import JSON
from service.web.bodies import Bodies
from service.web.parameters import Parameter, seconds_to_wait
from service.web.problems import AnyProblemType
from service.web.settings import WebSettings

SECONDS_BETWEEN_GLANCES = 2.0
"""So often a waiting request looks up whether this process is ending."""


class Waiters:
    """Lets callers wait for the end of a job, so many at a time; one too many is answered at once."""

    def __init__(self, jobs: JobStore, settings: WebSettings, draining: Event) -> None:
        self._jobs = jobs
        self._draining = draining
        self._longest_seconds = settings.longest_wait_seconds
        self._seats = BoundedSemaphore(settings.waiters)

    def wait(self, record: JobRecord, prefer: str | None) -> tuple[JobRecord, dict[str, str]]:
        """Wait as a `Prefer` header asks; give the job, and the header that says what was granted."""
        seconds = None if prefer is None else seconds_to_wait(prefer, self._longest_seconds)
        if seconds is None or not self._seats.acquire(blocking=False):
            return record, {}
        try:
            until = monotonic() + seconds
            while record.is_live and (left := until - monotonic()) > 0 and not self._draining.is_set():
                record = self._jobs.wait(record.id, min(left, SECONDS_BETWEEN_GLANCES))
        finally:
            self._seats.release()
        return record, {"Preference-Applied": f"wait={seconds}"}


@dataclass(frozen=True)
class Backend:
    """What every endpoint works with."""

    settings: WebSettings
    jobs: JobStore
    documents: DocumentStore
    bodies: Bodies
    waiters: Waiters
    draining: Event


@dataclass(frozen=True)
class Call:
    """One request, with its query read and its media type chosen."""

    request: Request
    media: str
    query: dict[str, Any]
    path: dict[str, str]


@dataclass(frozen=True)
class Success:
    """An answer that is no problem: its status, its body's models by media type, and its headers."""

    status: int
    description: str
    bodies: dict[str, Any] = field(default_factory=dict)
    headers: tuple[str, ...] = ()


@dataclass(frozen=True)
class Operation:
    """One method of one address."""

    name: str
    method: str
    path: str
    group: str
    summary: str
    answer: Callable[[Call], Response]
    successes: tuple[Success, ...]
    problems: tuple[AnyProblemType, ...] = ()
    query: tuple[Parameter, ...] = ()
    headers: tuple[str, ...] = ()
    body: Any = None
    body_optional: bool = False
    offers: tuple[str, ...] = (JSON,)
