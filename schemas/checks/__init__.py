"""Faults that no member shows on its own: rules of the contract across members, one topic a module."""

from collections.abc import Callable, Iterator

from schemas.checks import (
    commitments,
    history,
    meters,
    method,
    names,
    outages,
    plant,
    sizes,
    sources,
    state,
    supply,
    tasks,
)
from schemas.checks.request import Request
from schemas.job import Job
from schemas.problems import Fault

TOPICS: tuple[Callable[[Request], Iterator[Fault]], ...] = (
    sources.faults,
    names.faults,
    sizes.faults,
    plant.faults,
    state.faults,
    supply.faults,
    meters.faults,
    outages.faults,
    history.faults,
    commitments.faults,
    tasks.faults,
    method.faults,
)


def faults_of(job: Job, unread: frozenset[str] = frozenset()) -> Iterator[Fault]:
    """List what is wrong across the members of a job; `unread` members were faulty themselves and are left out."""
    request = Request(job, unread)
    for topic in TOPICS:
        yield from topic(request)
