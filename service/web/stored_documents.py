"""Fleets and windows: stored, read, listed and removed, every write a revision."""

from collections.abc import Callable, Sequence
from typing import Any, TypeVar
from urllib.parse import urlencode

from flask import Request, Response

from schemas.fleet import Fleet
from schemas.window import Window
from service.store import (
    UNCONDITIONAL,
    BadCursor,
    Condition,
    DocumentKind,
    NoSuchDocument,
    PreconditionFailed,
    Revision,
    Stored,
)
from service.web.answers import JSON, is_unchanged, json_bytes, tagged_json, unchanged_answer
from service.web.operations import Backend, Call, Operation, Success
from service.web.parameters import Parameter, at_most, is_id, read_limit, require_id
from service.web.problems import AnyProblemType, HttpProblem, malformed_header
from service.web.shapes import DocumentLinks, FleetList, RevisionDocument, RevisionList, WindowList, dumped
from service.web.submission import read_stored

LIMIT = Parameter(
    "limit", "Entries on a page", {"type": "integer", "minimum": 1, "maximum": 100, "default": 20}, read_limit, 20
)
CURSOR = Parameter(
    "cursor", "`next` of the page before", {"type": "string", "maxLength": 500}, at_most(500), default=None
)
_REVISION_DIGITS = 9
P = TypeVar("P")


class StoredDocuments:
    """The endpoints of one kind of stored document."""

    def __init__(self, backend: Backend, kind: DocumentKind) -> None:
        self._backend = backend
        self._documents = backend.documents
        self._kind: DocumentKind = kind
        self._home = f"/v1/{kind}s"

    def put(self, call: Call) -> Response:
        """Store the body as the next revision."""
        name = require_id(call.path["id"])
        condition = write_condition(call.request)
        with self._backend.bodies.document(call.request) as document:
            read_stored(self._kind, document)
            note = document.get("note") if isinstance(document, dict) else None
            text = json_bytes(document)
        try:
            revision = self._documents.put(self._kind, name, text, note=note, condition=condition)
        except PreconditionFailed as failed:
            raise _precondition_failed(failed) from None
        headers = {"ETag": revision.etag, "Location": f"{self._home}/{name}"}
        body = json_bytes(dumped(self._written(name, revision)))
        return Response(body, 201 if revision.number == 1 else 200, headers, content_type=JSON)

    def get(self, call: Call) -> Response:
        """Give the document itself, as it was sent."""
        return self._document(call, None)

    def get_revision(self, call: Call) -> Response:
        """Give the document as it was sent with one revision."""
        number = call.path["number"]
        if not (number.isascii() and number.isdecimal() and len(number) <= _REVISION_DIGITS and int(number) > 0):
            raise _no_such(self._kind, f"revision {number[:100]}")
        return self._document(call, int(number))

    def _document(self, call: Call, number: int | None) -> Response:
        stored = self._stored(call.path["id"], number)
        tag = stored.revision.etag.strip('"')
        if is_unchanged(call.request, tag):
            return unchanged_answer(tag)
        headers = {
            "ETag": stored.revision.etag,
            "Vary": "Accept",
            "Hourwright-Revision": str(stored.revision.number),
            "Content-Location": f"{self._home}/{stored.id}/revisions/{stored.revision.number}",
        }
        return Response(stored.text, 200, headers, content_type=JSON)

    def _stored(self, name: str, number: int | None) -> Stored:
        try:
            if is_id(name):
                return self._documents.get(self._kind, name, number)
        except NoSuchDocument:
            pass
        which = "" if number is None else f" in revision {number}"
        raise _no_such(self._kind, f"{self._kind} of this id{which}")

    def delete(self, call: Call) -> Response:
        """Remove the document with all its revisions; jobs keep what they were given."""
        name = call.path["id"]
        condition = write_condition(call.request)
        try:
            if not is_id(name):
                raise NoSuchDocument
            self._documents.remove(self._kind, name, condition)
        except NoSuchDocument:
            raise _no_such(self._kind, f"{self._kind} of this id") from None
        except PreconditionFailed as failed:
            raise _precondition_failed(failed) from None
        return Response(status=204)

    def list(self, call: Call) -> Response:
        """List what is stored."""
        page = page_or_refuse(lambda: self._documents.documents(self._kind, **call.query))
        entries = [dumped(self._written(name, revision)) for name, revision in page.documents]
        return self._paged(call, f"{self._kind}s", entries, self._home, page.next)

    def revisions(self, call: Call) -> Response:
        """List the revisions of one document."""
        name = call.path["id"]
        try:
            if not is_id(name):
                raise NoSuchDocument
            page = page_or_refuse(lambda: self._documents.revisions(self._kind, name, **call.query))
        except NoSuchDocument:
            raise _no_such(self._kind, f"{self._kind} of this id") from None
        entries = [dumped(self._written(name, revision)) for revision in page.revisions]
        return self._paged(call, "revisions", entries, f"{self._home}/{name}/revisions", page.next)

    def _paged(
        self, call: Call, member: str, entries: Sequence[dict[str, Any]], home: str, cursor: str | None
    ) -> Response:
        return tagged_json(
            call.request, {member: entries, "next": cursor}, next_link(home, {"limit": call.query["limit"]}, cursor)
        )

    def _written(self, name: str, revision: Revision) -> RevisionDocument:
        place = f"{self._home}/{name}"
        return RevisionDocument(
            id=name,
            revision=revision.number,
            written_at=revision.written_at,
            written_by=revision.written_by,
            note=revision.note,
            sha256=revision.sha256,
            etag=revision.etag,
            links=DocumentLinks(
                self=place, revision=f"{place}/revisions/{revision.number}", revisions=f"{place}/revisions"
            ),
        )


def next_link(home: str, query: dict[str, object], cursor: str | None) -> dict[str, str]:
    """Give the `Link` header to the next page (RFC 8288); nothing on the last one."""
    if cursor is None:
        return {}
    parameters = {name: value for name, value in query.items() if value is not None} | {"cursor": cursor}
    return {"Link": f'<{home}?{urlencode(parameters)}>; rel="next"'}


def write_condition(request: Request) -> Condition:
    """Read what a write rests on: `If-Match` with entity tags or `*`, `If-None-Match: *`."""
    any_of: frozenset[str] | None = None
    if "If-Match" in request.headers:
        wanted = request.if_match
        any_of = frozenset({"*"} if wanted.star_tag else {f'"{tag}"' for tag in wanted.as_set()})
    must_be_new = False
    if "If-None-Match" in request.headers:
        if not request.if_none_match.star_tag:
            raise malformed_header("If-None-Match", "must be `*` where a document is written")
        must_be_new = True
    return UNCONDITIONAL if any_of is None and not must_be_new else Condition(any_of, must_be_new)


def page_or_refuse(read: Callable[[], P]) -> P:
    """Read a page of a list; raises HttpProblem (400) for a cursor that the list has not given."""
    try:
        return read()
    except BadCursor:
        raise HttpProblem("bad-cursor", "the cursor was not given by this list") from None


def _no_such(kind: str, what: str) -> HttpProblem:
    return HttpProblem("no-such-document", f"there is no {what}", members={"kind": kind})


def _precondition_failed(failed: PreconditionFailed) -> HttpProblem:
    if failed.current_etag is None:
        return HttpProblem("precondition-failed", "nothing is stored under this id")
    headers = {"ETag": failed.current_etag}
    return HttpProblem("precondition-failed", f"the present entity tag is {failed.current_etag}", headers=headers)


def operations(backend: Backend) -> list[Operation]:
    """List the endpoints of fleets and windows."""
    return [*_of_kind(backend, "fleet"), *_of_kind(backend, "window")]


def _of_kind(backend: Backend, kind: DocumentKind) -> list[Operation]:
    resource = StoredDocuments(backend, kind)
    contract = Fleet if kind == "fleet" else Window
    pages = FleetList if kind == "fleet" else WindowList
    one, group, name = f"/v1/{kind}s/{{id}}", f"{kind}s", kind.title()
    unchanged = Success(304, "The caller has this state already", headers=("ETag",))
    reads: tuple[AnyProblemType, ...] = ("no-such-document", "precondition-failed", "store-unreachable")
    written = Success(200, "Stored as a further revision", {JSON: RevisionDocument}, ("ETag", "Location"))
    created = Success(201, "Stored as the first revision", {JSON: RevisionDocument}, ("ETag", "Location"))
    document = Success(200, f"The {kind} as it was sent", {JSON: contract}, ("ETag", "Hourwright-Revision"))
    return [
        Operation(
            f"store{name}",
            "PUT",
            one,
            group,
            f"Store a {kind}: the next revision of it",
            resource.put,
            (written, created),
            (
                "malformed-json",
                "invalid-request",
                "unreadable-body",
                "malformed-header",
                "precondition-failed",
                "body-too-large",
                "unsupported-media-type",
                "busy",
                "store-full",
                "store-unreachable",
            ),
            headers=("If-Match", "If-None-Match"),
            body=contract,
        ),
        Operation(
            f"read{name}",
            "GET",
            one,
            group,
            f"Read a {kind}",
            resource.get,
            (document, unchanged),
            reads,
            headers=("If-None-Match",),
        ),
        Operation(
            f"remove{name}",
            "DELETE",
            one,
            group,
            f"Remove a {kind} with all its revisions",
            resource.delete,
            (Success(204, "Removed"),),
            (*reads, "malformed-header"),
            headers=("If-Match",),
        ),
        Operation(
            f"list{name}s",
            "GET",
            f"/v1/{kind}s",
            group,
            f"List the {kind}s, by id",
            resource.list,
            (Success(200, "A page of the list", {JSON: pages}, ("ETag", "Link")), unchanged),
            ("bad-cursor", "precondition-failed", "store-unreachable"),
            (LIMIT, CURSOR),
            ("If-None-Match",),
        ),
        Operation(
            f"list{name}Revisions",
            "GET",
            f"{one}/revisions",
            group,
            f"List the revisions of a {kind}, newest first",
            resource.revisions,
            (Success(200, "A page of the list", {JSON: RevisionList}, ("ETag", "Link")), unchanged),
            (*reads, "bad-cursor"),
            (LIMIT, CURSOR),
            ("If-None-Match",),
        ),
        Operation(
            f"read{name}Revision",
            "GET",
            f"{one}/revisions/{{number}}",
            group,
            f"Read one revision of a {kind}",
            resource.get_revision,
            (document, unchanged),
            reads,
            headers=("If-None-Match",),
        ),
    ]
