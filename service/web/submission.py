"""From the document of a submission to a job that passed every check, with stored documents put in their places."""

import hashlib
import json
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Any, TypeVar

from pydantic import ValidationError
from pydantic_core import ErrorDetails

from schemas.calendar import Calendar, rows_of
from schemas.document import Document
from schemas.error_words import code_and_detail
from schemas.job import Job, OneWindow
from schemas.json_text import read_json
from schemas.places import place_of
from schemas.problems import Fault, InvalidRequest, RefusedError, Unsupported, pointer
from schemas.reading import read_job
from schemas.records import Reference
from schemas.support import require_supported
from service.store import DocumentKind, DocumentStore, NoSuchDocument
from service.web.parameters import is_id
from service.web.shapes import Size

D = TypeVar("D", bound=Document)
KINDS: tuple[DocumentKind, ...] = ("fleet", "window")
MOST_WINDOWS = 100
"""As many as the contract lets a sequence have; more are refused unread."""

SECONDS_TO_HAND_OVER = 5.0
"""Left between the end of planning and `needed_by` (contract, section 5)."""


@dataclass(frozen=True)
class Inlined:
    """A stored document put in its place: where its content stands now, and what was sent there."""

    inside: str
    sent: str
    kind: DocumentKind
    reference: Reference

    def holds(self, place: str) -> bool:
        """Tell whether a pointer lies in the document."""
        return place == self.inside or place.startswith(f"{self.inside}/")

    def as_sent(self, fault: Fault) -> Fault:
        """Move a fault to what was sent, and say where in the stored document it lies."""
        within = fault.pointer.removeprefix(self.inside)
        name = f"{self.kind} `{self.reference.id}` in revision {self.reference.revision}"
        return Fault(self.sent, fault.code, f"{name}{', at ' if within else ''}{within}: {fault.detail}")


@dataclass(frozen=True)
class Resolved:
    """A job with everything inline, and the revisions that were used for it."""

    job: Job
    inlined: tuple[Inlined, ...]

    def reference(self, kind: DocumentKind) -> Reference | None:
        """Give the revision that the job's only fleet or window was taken from; None where it was sent inline."""
        found = (each.reference for each in self.inlined if each.inside == f"/{kind}")
        return next(found, None)

    def as_sent(self, place: str) -> str:
        """Turn a pointer into the resolved job into one into the document sent."""
        return next((each.sent for each in self.inlined if each.holds(place)), place)


def resolve(document: object, documents: DocumentStore) -> Resolved:
    """Read a job whose fleet or windows may be stored ones.

    Raises InvalidRequest and Unsupported with every fault, each at a place in the document sent.
    """
    inliner = _Inliner(documents)
    whole = inliner.whole(document)
    inlined, faults = inliner.inlined, inliner.missing
    job: Job | None = None
    try:
        job = read_job(whole)
    except InvalidRequest as refused:
        faults.extend(refused.faults)
    if job is None or faults:
        raise InvalidRequest(_as_sent(faults, inlined))
    try:
        require_supported(job)
    except Unsupported as refused:
        raise Unsupported(_as_sent(refused.faults, inlined)) from None
    return Resolved(job, tuple(inlined))


class _Inliner:
    """Puts stored documents in their places; one that is not stored is a fault, and stays as it was sent."""

    def __init__(self, documents: DocumentStore) -> None:
        self._documents = documents
        self.inlined: list[Inlined] = []
        self.missing: list[Fault] = []

    def whole(self, document: object) -> object:
        """Give a document with everything inline that can be."""
        if not isinstance(document, Mapping):
            return document
        found: dict[str, Any] = dict(document)
        for kind in KINDS:
            self._by_id(found, kind)
        windows = found.get("windows")
        if isinstance(windows, list) and len(windows) <= MOST_WINDOWS:
            found["windows"] = [self._window(entry, pointer("windows", place)) for place, entry in enumerate(windows)]
        return found

    def _by_id(self, document: dict[str, Any], kind: DocumentKind) -> None:
        name = document.get(f"{kind}_id")
        if isinstance(name, str) and is_id(name) and document.get(kind) is None:
            content = self._stored(kind, name, f"/{kind}", f"/{kind}_id")
            if content is not None:
                del document[f"{kind}_id"]
                document[kind] = content

    def _window(self, entry: object, place: str) -> object:
        if not isinstance(entry, str) or not is_id(entry):
            return entry
        content = self._stored("window", entry, place, place)
        return entry if content is None else content

    def _stored(self, kind: DocumentKind, name: str, inside: str, sent: str) -> object | None:
        try:
            found = self._documents.get(kind, name)
        except NoSuchDocument:
            self.missing.append(Fault(sent, "unknown-reference", f"there is no {kind} `{name}`"))
            return None
        self.inlined.append(Inlined(inside, sent, kind, Reference(id=name, revision=found.revision.number)))
        return read_json(found.text)


def _as_sent(faults: Iterable[Fault], inlined: Iterable[Inlined]) -> Iterator[Fault]:
    for fault in faults:
        holder = next((each for each in inlined if each.holds(fault.pointer)), None)
        yield fault if holder is None else holder.as_sent(fault)


def read_stored(kind: DocumentKind, document: object) -> None:
    """Check a fleet or a window that is to be stored, as far as it can be checked without a job.

    Raises InvalidRequest with pointers into the document itself.
    """
    if not isinstance(document, Mapping):
        raise InvalidRequest([Fault("", "wrong-type", "must be an object")])
    other = "window" if kind == "fleet" else "fleet"
    try:
        read_job({kind: document, f"{other}_id": "any", "missing_initial": "assume_middle"})
    except RefusedError as refused:
        inside = f"/{kind}"
        own = [fault for fault in refused.faults if fault.pointer == inside or fault.pointer.startswith(f"{inside}/")]
        if own:
            raise InvalidRequest(
                Fault(fault.pointer.removeprefix(inside), fault.code, fault.detail) for fault in own
            ) from None


def read_small(contract: type[D], document: object) -> D:
    """Read a body other than a job; raises InvalidRequest."""
    try:
        return contract.model_validate(document)
    except ValidationError as wrong:
        errors = wrong.errors(include_url=False, include_input=False)
        raise InvalidRequest(_fault(contract, error) for error in errors) from None


def _fault(contract: type[Document], error: ErrorDetails) -> Fault:
    code, detail = code_and_detail(error)
    place = place_of(contract, error["loc"], error["type"])
    return Fault(pointer(*place.steps), code, detail)


def fingerprint(document: object) -> str:
    """Give the SHA-256 of a parsed document: the same however it is spaced, ordered, packed or its numbers written."""
    plain = json.dumps(_plain(document), sort_keys=True, separators=(",", ":"), ensure_ascii=True)
    return hashlib.sha256(plain.encode()).hexdigest()


def _plain(value: object) -> object:
    if isinstance(value, dict):
        return {name: _plain(member) for name, member in value.items() if member is not None}
    if isinstance(value, list):
        return [_plain(member) for member in value]
    is_whole = isinstance(value, int) and not isinstance(value, bool) and abs(value) < 2**53
    return float(value) if is_whole else value  # type: ignore[arg-type]  # just told to be an int


def size_of(job: Job) -> Size:
    """Count what a resolved job holds."""
    window = job.window if isinstance(job, OneWindow) else None
    calendar = None if window is None else Calendar.of(window)
    intervals = 0 if calendar is None else calendar.count
    fleet = job.fleet
    rows = sum(
        (len(rows_of(promise, calendar)) if calendar is not None else 1) * len(promise.applies_to.assets or (None,))
        for promise in job.commitments
    )
    return Size(
        assets=0 if fleet is None else len(fleet.assets),
        sites=0 if fleet is None else len(fleet.sites),
        intervals=intervals,
        asset_intervals=0 if fleet is None else len(fleet.assets) * intervals,
        commitment_rows=rows,
        outages=len(job.outages),
    )


def beware(job: Job, now: datetime) -> list[str]:
    """Say what is allowed, and likely not meant."""
    if job.needed_by is None:
        return []
    left = (job.needed_by - now).total_seconds() - SECONDS_TO_HAND_OVER
    if left <= 0:
        return ["`needed_by` leaves no time to plan: the job would end undecided"]
    if left < job.time_limit_seconds:
        return [f"`needed_by` leaves {left:.0f} s to plan, less than `time_limit_seconds`"]
    return []
