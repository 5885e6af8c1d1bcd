"""Changes to a request as a caller can apply them: JSON Patch (RFC 6902) on the document as it was accepted."""

import json
from copy import deepcopy
from typing import Any

from schemas.job import Job, ScheduleJob
from schemas.json_patch import patched
from schemas.reading import canonical, read_job
from workers.planning.diagnosis.levers.lever import Values

Operation = dict[str, Any]
OF_OTHER_TASKS = ("commitment", "step_hours")
"""Members that tell a task from `schedule`."""


def document_of(job: Job) -> dict[str, Any]:
    """Write a job as it was accepted; defaults are not filled in."""
    document: dict[str, Any] = json.loads(canonical(job))
    return document


def patch_of(document: dict[str, Any], values: Values) -> list[Operation]:
    """Give the operations that put values at their places, and add the parents that are missing."""
    changed, operations = deepcopy(document), list[Operation]()
    for place, value in values.items():
        *parents, last = place.removeprefix("/").split("/")
        here: Any = changed
        for depth, step in enumerate(parents):
            if isinstance(here, dict) and step not in here:
                here[step] = {}
                operations.append({"op": "add", "path": "/" + "/".join(parents[: depth + 1]), "value": {}})
            here = here[int(step)] if isinstance(here, list) else here[step]
        if value is None:
            if last in here:
                operations.append({"op": "remove", "path": place})
                del here[last]
            continue
        operations.append({"op": "replace" if last in here else "add", "path": place, "value": value})
        here[last] = value
    return operations


def patched_job(document: dict[str, Any], operations: list[Operation]) -> ScheduleJob:
    """Read the patched document as a job to be scheduled; raises InvalidRequest where it is none."""
    changed = patched(document, operations)
    asked = {name: value for name, value in changed.items() if name not in OF_OTHER_TASKS}
    job = read_job(asked | {"task": "schedule"})
    assert isinstance(job, ScheduleJob)
    return job
