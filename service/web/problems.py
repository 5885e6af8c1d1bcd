"""What can go wrong between a caller and the service, as problem documents (RFC 9457)."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Literal, NamedTuple

from schemas import problems as contract
from schemas.problems import MAX_REPORTED_FAULTS, Code, Fault, RefusedError

HttpProblemType = Literal[
    "bad-request",
    "not-found",
    "method-not-allowed",
    "not-acceptable",
    "body-too-large",
    "uri-too-long",
    "unsupported-media-type",
    "headers-too-large",
    "not-implemented",
    "unreadable-body",
    "invalid-parameters",
    "malformed-header",
    "no-such-document",
    "no-such-job",
    "job-forgotten",
    "not-finished",
    "no-schedule",
    "no-diagnosis",
    "already-ended",
    "still-live",
    "precondition-failed",
    "key-reused",
    "bad-cursor",
    "busy",
    "store-full",
    "store-unreachable",
    "internal",
]
AnyProblemType = HttpProblemType | contract.ProblemType


class Meaning(NamedTuple):
    """Status and title of a problem type, and what a caller does about it."""

    status: int
    title: str
    advice: str


MEANINGS: dict[AnyProblemType, Meaning] = {
    "malformed-json": Meaning(
        *contract.PROBLEM_TYPES["malformed-json"],
        "Send one JSON document in UTF-8 without duplicate names, NaN, Infinity or numbers beyond a double; `errors` "
        "says where the reading stopped.",
    ),
    "invalid-request": Meaning(
        *contract.PROBLEM_TYPES["invalid-request"],
        "Correct what `errors` lists: each entry holds a JSON Pointer (RFC 6901) into the document sent.",
    ),
    "unsupported": Meaning(
        *contract.PROBLEM_TYPES["unsupported"],
        "The contract allows it, this version does not plan it yet; `errors` lists what to leave out.",
    ),
    "bad-request": Meaning(400, "The request is not well-formed HTTP", "Correct the request line and the headers."),
    "not-found": Meaning(404, "There is nothing at this address", "`GET /openapi.json` lists what there is."),
    "method-not-allowed": Meaning(405, "The method is not offered here", "`Allow` lists the methods that are."),
    "not-acceptable": Meaning(406, "No media type asked for is offered here", "`offers` lists the media types."),
    "body-too-large": Meaning(413, "The body is too large", "`max_bytes` is the limit; the contract lists them all."),
    "uri-too-long": Meaning(414, "The request target is too long", "Shorten the query."),
    "unsupported-media-type": Meaning(
        415, "The body is in a form that is not read here", "Send application/json, plain or with gzip."
    ),
    "headers-too-large": Meaning(431, "The request headers are too large", "Send fewer or shorter headers."),
    "not-implemented": Meaning(501, "The transfer coding is not read here", "Send the body plain or chunked."),
    "unreadable-body": Meaning(400, "The body cannot be unpacked", "Send one complete gzip stream, or none."),
    "invalid-parameters": Meaning(
        422, "A parameter of the path or the query is not valid", "Correct what `errors` lists, by parameter."
    ),
    "malformed-header": Meaning(400, "A header is not well-formed", "Correct what `errors` lists, by header."),
    "no-such-document": Meaning(404, "There is no such fleet or window", "Store it first, or correct the id."),
    "no-such-job": Meaning(404, "There is no such job", "Correct the id; records are kept for a limited time."),
    "job-forgotten": Meaning(410, "The job was deleted or has expired", "Submit it again if it is still needed."),
    "not-finished": Meaning(409, "The job has not ended yet", "Ask again after `Retry-After`, or wait with `Prefer`."),
    "no-schedule": Meaning(404, "The job has no schedule", "The diagnosis, where there is one, says why."),
    "no-diagnosis": Meaning(404, "The job has no diagnosis", "A job that can be met has a schedule instead."),
    "already-ended": Meaning(409, "The job has ended already", "Nothing is left to cancel."),
    "still-live": Meaning(409, "The job has not ended", "Cancel it first, then delete it."),
    "precondition-failed": Meaning(
        412, "The document is not in the state named", "Read it again, and repeat the change on what it is now."
    ),
    "key-reused": Meaning(422, "The Idempotency-Key was sent with another request", "Use a new key for a new request."),
    "bad-cursor": Meaning(400, "The cursor is not one this list has given", "Start the list anew without a cursor."),
    "busy": Meaning(503, "Too many large requests at once", "Send it again after `Retry-After`."),
    "store-full": Meaning(503, "No further job is taken at present", "Send it again after `Retry-After`."),
    "store-unreachable": Meaning(503, "The job store cannot be reached", "Send it again after `Retry-After`."),
    "internal": Meaning(
        500, "The service has failed", "Nothing to be corrected in the request: give the operator the request id."
    ),
}


@dataclass(frozen=True)
class InputFault:
    """What is wrong with a parameter of path or query, or with a header."""

    place: Literal["parameter", "header"]
    name: str
    code: Code
    detail: str

    def as_member(self) -> dict[str, str]:
        """Write it as an entry of `errors`."""
        return {self.place: self.name, "code": self.code, "detail": self.detail}


class HttpProblem(Exception):  # noqa: N818 - a problem in the sense of RFC 9457
    """A refusal that ends the handling of a request; `members` are added to the problem document."""

    def __init__(
        self,
        kind: AnyProblemType,
        detail: str,
        *,
        errors: Sequence[Fault | InputFault] = (),
        headers: Mapping[str, str] | None = None,
        members: Mapping[str, Any] | None = None,
    ) -> None:
        super().__init__(kind, detail)
        self.kind = kind
        self.detail = detail
        self.errors = tuple(errors)
        self.headers = dict(headers or {})
        self.members = dict(members or {})

    @property
    def status(self) -> int:
        """HTTP status of the answer."""
        return MEANINGS[self.kind].status

    def document(self, request_id: str) -> dict[str, Any]:
        """Write the problem document for one request."""
        meaning = MEANINGS[self.kind]
        found: dict[str, Any] = {
            "type": f"/problems/{self.kind}",
            "title": meaning.title,
            "status": meaning.status,
            "detail": self.detail,
            "instance": f"urn:hourwright:request:{request_id}",
        }
        if self.errors:
            found["errors"] = [_entry(fault) for fault in self.errors[:MAX_REPORTED_FAULTS]]
            found["errors_truncated"] = len(self.errors) > MAX_REPORTED_FAULTS
        return found | self.members


def refusal(refused: RefusedError) -> HttpProblem:
    """Turn a refusal of the contract's own reader into an answer."""
    return HttpProblem(refused.problem_type, refused.problem().detail, errors=refused.faults)


def invalid_parameters(faults: Sequence[InputFault]) -> HttpProblem:
    """Refuse parameters of path or query, all faults at once."""
    detail = f"`{faults[0].name}` {faults[0].detail}" if len(faults) == 1 else f"{len(faults)} faults were found"
    return HttpProblem("invalid-parameters", detail, errors=faults)


def malformed_header(name: str, detail: str) -> HttpProblem:
    """Refuse a header."""
    fault = InputFault("header", name, "bad-format", detail)
    return HttpProblem("malformed-header", f"`{name}` {detail}", errors=[fault])


def _entry(fault: Fault | InputFault) -> dict[str, str]:
    if isinstance(fault, InputFault):
        return fault.as_member()
    return {"pointer": fault.pointer, "code": fault.code, "detail": fault.detail}
