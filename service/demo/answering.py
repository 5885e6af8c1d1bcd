"""Ask the service, as any caller would, and keep every document that it gives."""

import json
import re
from collections.abc import Sequence
from dataclasses import dataclass
from time import monotonic
from typing import Any

from service.calling import Answered, Api, NotReached
from service.demo.folder import Folder

WAIT = "wait=30"
LIVE = ("queued", "running", "cancelling")
SECONDS_ABOVE_THE_TIME_LIMIT = 60.0
Document = dict[str, Any]


class NoAnswerError(Exception):
    """The service gave no answer to a job; says what was asked and what came instead."""

    def __init__(self, asked: str, words: str) -> None:
        super().__init__(asked, words)
        self.asked = asked
        self.words = words

    def __str__(self) -> str:
        return f"no answer to {self.asked}: {self.words.strip() or 'nothing was said'}"


@dataclass(frozen=True)
class Reply:
    """The request as the service keeps it, to which pointers and patches refer, and its answer."""

    request: Document
    answer: Document


class Answering:
    """Submits jobs one after the other; what is kept bears the job's label."""

    def __init__(self, api: Api, folder: Folder) -> None:
        self._api = api
        self._folder = folder

    def answer(self, job: Document, patch: Sequence[Document] = ()) -> Reply:
        """Return what the service says to a job document: a schedule, a diagnosis, or that time ran out.

        `patch` is what has made the document from an earlier one; it is kept beside. Raises NoAnswerError.
        """
        record = self._ended(job)
        name = _name(str(record["label"]))
        links = record["links"]
        if patch:
            self._folder.keep(f"{name}-patch.json", json.dumps(list(patch), indent=2).encode() + b"\n")
        request = json.loads(self._kept(links["request"], f"{name}-request.json"))
        self._kept(links["self"], f"{name}-job.json")
        if links["schedule"] is not None:
            self._kept(links["schedule"], f"{name}-schedule.csv", "text/csv")
            found = json.loads(self._kept(links["schedule"], f"{name}-schedule.json"))
        elif links["diagnosis"] is not None:
            found = json.loads(self._kept(links["diagnosis"], f"{name}-diagnosis.json"))
            if found.get("nearest_schedule") is not None:
                nearest = f"{links['self']}/schedule?accept_shortfall=true"
                self._kept(nearest, f"{name}-nearest-schedule-falls-short.csv", "text/csv")
        else:
            raise NoAnswerError(f"job {record['id']}", f"it is {record['state']}: {record['error']}")
        return Reply(request, found)

    def _ended(self, job: Document) -> Document:
        """Submit a job and give its record when it has ended."""
        record = self._asked(202, "POST", "/v1/jobs", job, Prefer=WAIT).document
        until = monotonic() + float(job["time_limit_seconds"]) + SECONDS_ABOVE_THE_TIME_LIMIT
        while record["state"] in LIVE:
            if monotonic() > until:
                raise NoAnswerError(f"job {record['id']}", f"it is still {record['state']}")
            record = self._asked(200, "GET", record["links"]["self"], Prefer=WAIT).document
        return dict(record)

    def _kept(self, path: str, name: str, media: str = "application/json") -> bytes:
        body = self._asked(200, "GET", path, Accept=media).body
        self._folder.keep(name, body)
        return body

    def _asked(self, expected: int, method: str, path: str, document: object = None, **headers: str) -> Answered:
        try:
            answered = self._api.ask(method, path, document, **headers)
        except NotReached as fault:
            raise NoAnswerError(f"{method} {path}", str(fault)) from fault
        if answered.status != expected:
            raise NoAnswerError(
                f"{method} {path}", f"status {answered.status}: {answered.body.decode(errors='replace')}"
            )
        return answered


def _name(label: str) -> str:
    return re.sub(r"[^a-z0-9]+", "-", label.lower()).strip("-")
