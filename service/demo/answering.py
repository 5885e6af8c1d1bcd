"""Ask the planner. Where the answer comes from is known in this module only."""

import json
import subprocess
from typing import Any

from service.plan_command import planner_command

ANSWERED = {0, 3, 4}
"""Exit statuses of `hourwright plan` with which an answer is printed; any other is a refusal or a fault."""


class NoAnswerError(Exception):
    """The planner gave no answer; carries its exit status and what it had to say."""

    def __init__(self, status: int, words: str) -> None:
        super().__init__(status, words)
        self.status = status
        self.words = words

    def __str__(self) -> str:
        return f"the planner gave no answer (exit status {self.status}): {self.words.strip() or 'it said nothing'}"


def answer(job: dict[str, Any]) -> dict[str, Any]:
    """Return the answer document to a job document: a schedule, a diagnosis, or that time ran out.

    Raises NoAnswerError where there is none.
    """
    done = subprocess.run(planner_command("-"), input=json.dumps(job).encode(), capture_output=True, check=False)
    if done.returncode not in ANSWERED:
        raise NoAnswerError(done.returncode, done.stderr.decode(errors="replace"))
    document: dict[str, Any] = json.loads(done.stdout)
    return document
