"""The service about itself: versions, health, and what its problem types mean."""

import platform
from collections.abc import Callable
from importlib.metadata import version

from flask import Response

from schemas import support
from schemas.document import Answer
from service.store import StoreUnreachable
from service.web.answers import JSON, SECONDS_UNTIL_THE_STORE_IS_BACK, json_answer, tagged_json
from service.web.operations import Backend, Call, Operation, Success
from service.web.problems import MEANINGS, HttpProblem
from service.web.shapes import (
    Alive,
    ContractVersion,
    NotYet,
    ProblemPage,
    Readiness,
    ReadinessChecks,
    VersionDocument,
    dumped,
)

CONTRACT_VERSION = "1.0"
GROUP = "service"
_LIBRARIES = ("flask", "pydantic", "tzdata", "waitress")


class Status:
    """The endpoints that need no job."""

    def __init__(self, backend: Backend) -> None:
        self._backend = backend

    def version(self, call: Call) -> Response:
        """Say which versions answer, and what of the contract is not done yet."""
        found = VersionDocument(
            name="hourwright",
            version=version("hourwright"),
            contract=CONTRACT_VERSION,
            contract_versions=[ContractVersion(version=CONTRACT_VERSION, request_fields_added=[])],
            not_yet=NotYet(
                tasks=sorted(support.UNSUPPORTED_TASKS),
                methods=sorted(support.UNSUPPORTED_METHODS),
            ),
            libraries={"python": platform.python_version()} | {name: version(name) for name in _LIBRARIES},
        )
        return tagged_json(call.request, dumped(found))

    def live(self, _call: Call) -> Response:
        """Say that the process answers; nothing else is looked at."""
        return json_answer(dumped(Alive()))

    def ready(self, _call: Call) -> Response:
        """Say whether jobs are taken: 503 while the store is out of reach or this process is ending."""
        found = self._readiness()
        if found.status == "fail":
            return json_answer(dumped(found), 503, {"Retry-After": str(SECONDS_UNTIL_THE_STORE_IS_BACK)})
        return json_answer(dumped(found))

    def _readiness(self) -> Readiness:
        unknown = ReadinessChecks(store="fail", keeper=None, workers=None, workers_by_queue=None, queued=None)
        try:
            self._backend.jobs.ping()
            health = self._backend.jobs.health()
        except StoreUnreachable:
            return Readiness(status="fail", warnings=["the job store is out of reach"], checks=unknown)
        by_queue: dict[str, int] = {}
        for worker in health.workers:
            by_queue[worker.queue] = by_queue.get(worker.queue, 0) + 1
        warnings = [] if health.workers else ["no worker has been seen: jobs are taken, and wait"]
        if not health.keeper_seen:
            warnings.append("no keeper has been seen: jobs of a worker that dies are not taken up again")
        checks = ReadinessChecks(
            store="pass",
            keeper="pass" if health.keeper_seen else "warn",
            workers=len(health.workers),
            workers_by_queue=by_queue,
            queued=health.queued,
        )
        if self._backend.draining.is_set():
            return Readiness(status="fail", warnings=["this process is ending", *warnings], checks=checks)
        return Readiness(status="warn" if warnings else "pass", warnings=warnings, checks=checks)

    def problem(self, call: Call) -> Response:
        """Say what a problem type means."""
        name = call.path["type"]
        for kind, meaning in MEANINGS.items():
            if kind == name:
                page = ProblemPage(
                    type=f"/problems/{kind}", title=meaning.title, status=meaning.status, advice=meaning.advice
                )
                return json_answer(dumped(page))
        raise HttpProblem("not-found", "there is no problem type of this name")


def operations(backend: Backend) -> list[Operation]:
    """List the endpoints of the service itself."""
    status = Status(backend)
    readiness = Success(200, "Jobs are taken", {JSON: Readiness})
    why = "Jobs are not taken: the store is out of reach or the process is ending"
    unready = Success(503, why, {JSON: Readiness}, ("Retry-After",))
    return [
        _read("readVersion", "/v1/version", status.version, "Read which versions answer", VersionDocument),
        _read("isAlive", "/health/live", status.live, "Tell whether the process answers", Alive),
        Operation(
            "isReady",
            "GET",
            "/health/ready",
            GROUP,
            "Tell whether jobs are taken, and whether anybody is seen who works on them",
            status.ready,
            (readiness, unready),
        ),
        Operation(
            "readProblemType",
            "GET",
            "/problems/{type}",
            GROUP,
            "Read what a problem type means and what to do about it",
            status.problem,
            (Success(200, "What it means", {JSON: ProblemPage}),),
            ("not-found",),
        ),
    ]


def _read(name: str, path: str, answer: Callable[[Call], Response], summary: str, model: type[Answer]) -> Operation:
    return Operation(name, "GET", path, GROUP, summary, answer, (Success(200, summary, {JSON: model}),))
