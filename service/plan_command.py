"""Plan one request file with no service: hand over to the planner, which lives in a process of its own."""

import os
import sys


def planner_command(file: str, *options: str) -> list[str]:
    """Return the command that plans a file (`-`: standard input); `workers.plan_file` says what it prints and returns.

    The planner is started by its name and isolated (-I), since the service imports no solver and no decoy may be run.
    """
    return [sys.executable, "-I", "-m", "workers.plan_file", *options, "--", file]


def plan(file: str, threads: int | None) -> int:
    """Become the planner; its input, output, signals and exit status are then those of this command.

    `threads` is how many independent parts are solved side by side; `None`: as many as there are processors.
    """
    command = planner_command(file, *([] if threads is None else ["--threads", str(threads)]))
    os.execv(command[0], command)
