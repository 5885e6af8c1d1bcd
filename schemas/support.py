"""What of the contract this version plans, and the refusal, by name, of the rest.

One line a thing that is not done yet: building it means deleting its line.
"""

from collections.abc import Iterator

from schemas.job import Job
from schemas.problems import Fault, Unsupported, pointer

UNSUPPORTED_TASKS = {"reschedule", "sequence"}
UNSUPPORTED_METHODS = {"coordinated"}
NO_STORE = "there is no store behind this command: give the document itself"
UNSUPPORTED_MEMBERS = {
    "fleet_id": NO_STORE,
    "window_id": NO_STORE,
    "initial_from_job_id": "there are no earlier jobs behind this command: give `initial`",
    "callback": "nobody is told of the end of a job yet",
}


def require_supported(job: Job) -> None:
    """Raise `Unsupported` with one fault for each thing asked for that cannot be done yet."""
    if faults := list(_unsupported(job)):
        raise Unsupported(faults)


def _unsupported(job: Job) -> Iterator[Fault]:
    if job.task in UNSUPPORTED_TASKS:
        yield _fault(f"the task `{job.task}` is not done yet", "task")
    if job.method in UNSUPPORTED_METHODS:
        yield _fault(f"the method `{job.method}` is not offered yet", "method")
    for member, why in UNSUPPORTED_MEMBERS.items():
        if getattr(job, member, None):
            yield _fault(why, member)


def _fault(detail: str, *steps: str | int) -> Fault:
    return Fault(pointer=pointer(*steps), code="unsupported", detail=detail)
