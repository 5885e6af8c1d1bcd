"""Jobs: submitted, validated, listed, read, cancelled and forgotten."""

from collections.abc import Callable
from datetime import UTC, datetime
from typing import Any, TypeVar

from flask import Response

from schemas.assumptions import assumptions
from schemas.job import Job
from schemas.reading import canonical
from schemas.records import JobRecord
from schemas.schedule import Assumption
from service.store import (
    Accepted,
    AlreadyEnded,
    BadCursor,
    IdempotencyKey,
    JobForgotten,
    KeyReused,
    NoAnswer,
    NoSuchJob,
    StillLive,
    Submission,
)
from service.web.answers import JSON, is_unchanged, json_answer, tag_of, tagged_json, unchanged_answer
from service.web.operations import Backend, Call, Operation, Success
from service.web.parameters import Parameter, at_most, idempotency_key, is_id, one_of
from service.web.problems import AnyProblemType, HttpProblem
from service.web.shapes import CancelRequest, JobDocument, JobLinks, JobList, Validation, dumped
from service.web.stored_documents import CURSOR, LIMIT, next_link
from service.web.submission import beware, fingerprint, read_small, resolve, size_of

HOME = "/v1/jobs"
SECONDS_BETWEEN_LOOKS = 1
"""What `Retry-After` says while a job has not ended; `Prefer: wait=N` spares the looking."""

STATES = ("queued", "running", "cancelling", "finished", "failed", "cancelled")
_SCOPE = f"POST {HOME}"
R = TypeVar("R")


class Jobs:
    """The endpoints of jobs, but for their answers."""

    def __init__(self, backend: Backend, now: Callable[[], datetime]) -> None:
        self._backend = backend
        self._jobs = backend.jobs
        self._now = now

    def submit(self, call: Call) -> Response:
        """Check a job and put it into its queue."""
        header = idempotency_key(call.request.headers.get("Idempotency-Key"))
        with self._backend.bodies.document(call.request) as document:
            key = None if header is None else IdempotencyKey(_SCOPE, header, fingerprint(document))
            submission = self._once(document, key)
        record, applied = self._backend.waiters.wait(submission.record, call.request.headers.get("Prefer"))
        headers = {"Location": f"{HOME}/{record.id}", **_while_live(record), **applied}
        if submission.replayed:
            headers["Idempotency-Replayed"] = "true"
        return json_answer(job_document(record), 202, headers)

    def _once(self, document: object, key: IdempotencyKey | None) -> Submission:
        try:
            known = None if key is None else self._jobs.recall(key)
            return known or self._jobs.submit(self._accepted(document), key)
        except KeyReused:
            detail = "an earlier request with this key asked for something else"
            raise HttpProblem("key-reused", detail, members={"header": "Idempotency-Key"}) from None
        except JobForgotten:
            raise HttpProblem("job-forgotten", "the job that this key stands for was forgotten") from None

    def _accepted(self, document: object) -> Accepted:
        resolved = resolve(document, self._backend.documents)
        return Accepted(
            job=resolved.job,
            resolved=canonical(resolved.job),
            fleet=resolved.reference("fleet"),
            window=resolved.reference("window"),
        )

    def validate(self, call: Call) -> Response:
        """Make every check of a submission, and keep nothing."""
        with self._backend.bodies.document(call.request) as document:
            resolved = resolve(document, self._backend.documents)
        taken = [
            Assumption(pointer=resolved.as_sent(each.pointer), text=each.text) for each in assumptions(resolved.job)
        ]
        found = Validation(assumptions=taken, cautions=beware(resolved.job, self._now()), size=size_of(resolved.job))
        return json_answer(dumped(found))

    def list(self, call: Call) -> Response:
        """List jobs, newest first."""
        try:
            page = self._jobs.jobs(**call.query)
        except BadCursor:
            raise HttpProblem("bad-cursor", "the cursor was not given by this list") from None
        query = {name: value for name, value in call.query.items() if name != "cursor"}
        document = {"jobs": [job_document(record) for record in page.jobs], "next": page.next}
        return tagged_json(call.request, document, next_link(HOME, query, page.next))

    def get(self, call: Call) -> Response:
        """Read a job, at its end if the caller waits for it."""
        record = known_job(self._backend, call.path["id"])
        record, applied = self._backend.waiters.wait(record, call.request.headers.get("Prefer"))
        return tagged_json(call.request, job_document(record), {**_while_live(record), **applied})

    def cancel(self, call: Call) -> Response:
        """Ask a job to end."""
        job_id = known_job(self._backend, call.path["id"]).id
        with self._backend.bodies.document(call.request, optional=True) as document:
            wanted = read_small(CancelRequest, document)
        try:
            record = or_gone(lambda: self._jobs.cancel(job_id, keep_best=wanted.keep_best))
        except AlreadyEnded as ended:
            detail = f"the job is {ended.record.state} already"
            raise HttpProblem("already-ended", detail, members=_standing(ended.record)) from None
        return json_answer(job_document(record), 202 if record.is_live else 200, _while_live(record))

    def delete(self, call: Call) -> Response:
        """Forget an ended job."""
        job_id = known_job(self._backend, call.path["id"]).id
        try:
            or_gone(lambda: self._jobs.delete(job_id))
        except StillLive as live:
            raise HttpProblem("still-live", f"the job is {live.record.state}", members=_standing(live.record)) from None
        return Response(status=204)

    def request(self, call: Call) -> Response:
        """Give the job as it was accepted, fleet and window inline."""
        record = known_job(self._backend, call.path["id"])
        tag = tag_of(record.id, record.request_sha256)
        if is_unchanged(call.request, tag):
            return unchanged_answer(tag)
        return Response(
            resolved_request(self._backend, record.id), 200, {"ETag": f'"{tag}"', "Vary": "Accept"}, content_type=JSON
        )


def known_job(backend: Backend, job_id: str) -> JobRecord:
    """Read a job; raises HttpProblem, 404 where there is none and 410 where there was one."""
    if not is_id(job_id):
        raise HttpProblem("no-such-job", "there is no job of this id")
    return or_gone(lambda: backend.jobs.job(job_id))


def or_gone(ask: Callable[[], R]) -> R:
    """Ask the store about a job; raises HttpProblem, 404 where there is none and 410 where there was one."""
    try:
        return ask()
    except NoSuchJob:
        raise HttpProblem("no-such-job", "there is no job of this id") from None
    except JobForgotten:
        raise HttpProblem("job-forgotten", "there was a job of this id") from None


def resolved_request(backend: Backend, job_id: str) -> bytes:
    """Give the job as it was accepted; raises HttpProblem where it is not kept any more."""
    try:
        return or_gone(lambda: backend.jobs.request(job_id))
    except NoAnswer:
        raise HttpProblem("job-forgotten", "the request of this job is not kept any more") from None


def job_document(record: JobRecord) -> dict[str, Any]:
    """Write a job with its links; those to reports and events come with these."""
    home = f"{HOME}/{record.id}"
    has_schedule = record.answer == "schedule"
    links = JobLinks(
        self=home,
        request=f"{home}/request",
        schedule=f"{home}/schedule" if record.is_live or has_schedule else None,
        diagnosis=f"{home}/diagnosis" if record.answer in ("diagnosis", "undecided") else None,
        report=None,
        events=None,
        cancel=f"{home}/cancel" if record.is_live else None,
    )
    return {**dumped(record), "links": dumped(links)}


def _standing(record: JobRecord) -> dict[str, Any]:
    return {"state": record.state, "job": f"{HOME}/{record.id}"}


def _while_live(record: JobRecord) -> dict[str, str]:
    return {"Retry-After": str(SECONDS_BETWEEN_LOOKS)} if record.is_live else {}


STATE = Parameter("state", "Jobs in this state only", {"type": "string", "enum": list(STATES)}, one_of(*STATES))
LABEL = Parameter("label", "Jobs with this label only", {"type": "string", "maxLength": 200}, at_most(200))
_BODY_PROBLEMS: tuple[AnyProblemType, ...] = (
    "malformed-json",
    "invalid-request",
    "unreadable-body",
    "body-too-large",
    "unsupported-media-type",
    "busy",
)
_ONE: tuple[AnyProblemType, ...] = ("no-such-job", "job-forgotten", "store-unreachable")
_UNCHANGED = Success(304, "The caller has this state already", headers=("ETag",))


def operations(backend: Backend, now: Callable[[], datetime] = lambda: datetime.now(UTC)) -> list[Operation]:
    """List the endpoints of jobs; `now` is the clock that `needed_by` is read against."""
    jobs = Jobs(backend, now)
    return [*_of_submission(jobs), *_of_one(jobs)]


def _of_submission(jobs: Jobs) -> list[Operation]:
    accepted = Success(
        202,
        "Accepted: the job, which may have ended already where the caller waited",
        {JSON: JobDocument},
        ("Location", "Retry-After", "Preference-Applied", "Idempotency-Replayed"),
    )
    return [
        Operation(
            "submitJob",
            "POST",
            HOME,
            "jobs",
            "Submit a job",
            jobs.submit,
            (accepted,),
            (
                *_BODY_PROBLEMS,
                "unsupported",
                "malformed-header",
                "key-reused",
                "job-forgotten",
                "store-full",
                "store-unreachable",
            ),
            headers=("Idempotency-Key", "Prefer"),
            body=Job,
        ),
        Operation(
            "validateJob",
            "POST",
            f"{HOME}/validate",
            "jobs",
            "Make every check of a submission, and keep nothing",
            jobs.validate,
            (Success(200, "The job would be accepted", {JSON: Validation}),),
            (*_BODY_PROBLEMS, "unsupported", "store-unreachable"),
            body=Job,
        ),
        Operation(
            "listJobs",
            "GET",
            HOME,
            "jobs",
            "List jobs, newest first",
            jobs.list,
            (Success(200, "A page of the list", {JSON: JobList}, ("ETag", "Link")), _UNCHANGED),
            ("bad-cursor", "precondition-failed", "store-unreachable"),
            (STATE, LABEL, LIMIT, CURSOR),
            ("If-None-Match",),
        ),
    ]


def _of_one(jobs: Jobs) -> list[Operation]:
    one = f"{HOME}/{{id}}"
    read = Success(200, "The job", {JSON: JobDocument}, ("ETag", "Retry-After", "Preference-Applied"))
    return [
        Operation(
            "readJob",
            "GET",
            one,
            "jobs",
            "Read a job, at its end if the caller waits for it",
            jobs.get,
            (read, _UNCHANGED),
            (*_ONE, "precondition-failed"),
            headers=("If-None-Match", "Prefer"),
        ),
        Operation(
            "deleteJob",
            "DELETE",
            one,
            "jobs",
            "Forget an ended job",
            jobs.delete,
            (Success(204, "Forgotten"),),
            (*_ONE, "still-live"),
        ),
        Operation(
            "cancelJob",
            "POST",
            f"{one}/cancel",
            "jobs",
            "Ask a job to end",
            jobs.cancel,
            (
                Success(200, "Cancelled", {JSON: JobDocument}),
                Success(202, "Ending, within 3 s", {JSON: JobDocument}, ("Retry-After",)),
            ),
            (*_ONE, *_BODY_PROBLEMS, "already-ended"),
            body=CancelRequest,
            body_optional=True,
        ),
        Operation(
            "readJobRequest",
            "GET",
            f"{one}/request",
            "jobs",
            "Read the job as it was accepted, fleet and window inline: itself a valid job",
            jobs.request,
            (Success(200, "The resolved request", {JSON: Job}, ("ETag",)), _UNCHANGED),
            (*_ONE, "precondition-failed"),
            headers=("If-None-Match",),
        ),
    ]
