"""The processes of a deployment by their names on the command line, and what each needs to find in its environment."""

import os
import sys
from collections.abc import Mapping
from typing import Literal, NoReturn

from schemas.records import DEFAULT_PREFIX, rq_prefix

Process = Literal["serve", "work", "keep"]

MODULES: dict[Process, str] = {
    "serve": "service.serve",
    "work": "workers.work_process",
    "keep": "workers.keep_process",
}
"""Started by name: the service imports no worker."""

ONE_THREAD = {"OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1", "MKL_NUM_THREADS": "1"}
"""Read when numpy is loaded; a worker forks, and must have no thread but its own when it does."""


def command_of(process: Process) -> list[str]:
    """Give the command line of a process: this Python, isolated."""
    return [sys.executable, "-I", "-m", MODULES[process]]


def environment_of(process: Process, surroundings: Mapping[str, str]) -> dict[str, str]:
    """Give the environment of a process: what surrounds this one, and what must be set before its Python starts."""
    needed = {"RQ_KEY_PREFIX": rq_prefix(surroundings.get("HOURWRIGHT_KEY_PREFIX", DEFAULT_PREFIX))}
    return {**surroundings, **needed, **(ONE_THREAD if process == "work" else {})}


def become(process: Process, surroundings: Mapping[str, str] = os.environ) -> NoReturn:
    """Turn this process into that one; its id stays, so signals of whoever started it arrive there."""
    sys.stdout.flush()
    command = command_of(process)
    os.execve(command[0], command, environment_of(process, surroundings))
