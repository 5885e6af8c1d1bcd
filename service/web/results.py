"""Answers of jobs: the schedule as JSON or CSV, streamed asset by asset, and the diagnosis."""

import json
from collections.abc import Iterable, Iterator, Mapping, Sequence
from itertools import chain
from typing import Any

from flask import Response

from schemas.diagnosis import Diagnosis
from schemas.json_text import read_json
from schemas.records import JobRecord
from schemas.schedule import Schedule, Undecided
from service.store import NoAnswer, NoSuchAsset, ScheduleParts
from service.web import schedule_csv
from service.web.answers import CSV, JSON, is_unchanged, tag_of, tagged_json, unchanged_answer
from service.web.jobs import HOME, SECONDS_BETWEEN_LOOKS, known_job, or_gone, resolved_request
from service.web.operations import Backend, Call, Operation, Success
from service.web.parameters import Parameter, read_flag, read_id
from service.web.problems import HttpProblem, InputFault, invalid_parameters

ASSET = Parameter(
    "asset", "Assets to be given; all where absent", {"type": "array", "items": {"type": "string"}}, read_id,
    repeatable=True,
)  # fmt: skip
ACCEPT_SHORTFALL = Parameter(
    "accept_shortfall",
    "Give the nearest schedule of an infeasible job; it does not meet the request",
    {"type": "boolean", "default": False},
    read_flag,
    default=False,
)
FALLS_SHORT = "This schedule does not meet the request: its diagnosis says what it leaves out."
BREAKS_RULES = "The schedule that was checked breaks rules: its JSON form lists them under verification."


class Results:
    """The endpoints of what a job has found."""

    def __init__(self, backend: Backend) -> None:
        self._backend = backend
        self._jobs = backend.jobs

    def schedule(self, call: Call) -> Response:
        """Give the schedule, or the nearest one where the caller takes one that falls short."""
        record = known_job(self._backend, call.path["id"])
        _require_ended(record)
        wanted: list[str] = call.query["asset"]
        nearest = bool(call.query["accept_shortfall"]) and record.answer == "diagnosis"
        if record.answer != "schedule" and not nearest:
            raise _no_schedule(record)
        tag = tag_of(record.id, str(record.attempt), str(record.finished_at), call.media, str(nearest), *wanted)
        if is_unchanged(call.request, tag):
            return unchanged_answer(tag)
        parts = self._nearest(record, wanted) if nearest else self._parts(record, wanted)
        parts.head["job_id"] = record.id
        headers = {"ETag": f'"{tag}"', "Vary": "Accept"}
        if call.media == CSV:
            return self._csv(record, parts, headers)
        return Response(_begun(_json_pieces(parts)), 200, headers, content_type=JSON)

    def _parts(self, record: JobRecord, wanted: Sequence[str]) -> ScheduleParts:
        try:
            return or_gone(lambda: self._jobs.schedule(record.id, wanted or None))
        except NoAnswer as without:
            raise _no_schedule(without.record) from None
        except NoSuchAsset as unknown:
            raise _no_such_assets(unknown.asset_ids) from None

    def _nearest(self, record: JobRecord, wanted: Sequence[str]) -> ScheduleParts:
        try:
            found = or_gone(lambda: self._jobs.diagnosis(record.id)).get("nearest_schedule")
        except NoAnswer as without:
            raise _no_schedule(without.record) from None
        if found is None:
            raise _no_schedule(record)
        head = {name: member for name, member in found.items() if name != "assets"}
        head["cautions"] = [FALLS_SHORT, *head.get("cautions", [])]
        assets = found["assets"]
        if unknown := sorted(set(wanted) - {asset["id"] for asset in assets}):
            raise _no_such_assets(unknown)
        return ScheduleParts(head, (asset for asset in assets if not wanted or asset["id"] in wanted))

    def _csv(self, record: JobRecord, parts: ScheduleParts, headers: dict[str, str]) -> Response:
        request: Any = read_json(resolved_request(self._backend, record.id))
        sites = {asset["id"]: asset["site"] for asset in request["fleet"]["assets"] if asset.get("site")}
        products = [product["id"] for product in _windows(request)[0].get("reserve_products") or []]
        lines = schedule_csv.lines(parts.head["interval_starts"], iter(parts.assets), sites, products)
        cautions = list(parts.head["cautions"])
        if parts.head.get("outcome") == "violated":
            cautions.insert(0, BREAKS_RULES)
        headers |= {
            "Hourwright-Caution": " ".join(cautions).encode("ascii", "replace").decode(),
            "Content-Disposition": f'attachment; filename="{record.id}.csv"',
        }
        pieces = (line.encode() for line in lines)
        return Response(_begun(pieces), 200, headers, content_type=f"{CSV}; charset=utf-8; header=present")

    def diagnosis(self, call: Call) -> Response:
        """Say why a job cannot be met, or what is known of one that ran out of time."""
        record = known_job(self._backend, call.path["id"])
        _require_ended(record)
        if record.answer not in ("diagnosis", "undecided"):
            raise _no_diagnosis(record)
        try:
            found = or_gone(lambda: self._jobs.diagnosis(record.id))
        except NoAnswer as without:
            raise _no_diagnosis(without.record) from None
        return tagged_json(call.request, {**found, "job_id": record.id})


def _windows(request: Mapping[str, Any]) -> list[Mapping[str, Any]]:
    return [request["window"]] if "window" in request else list(request["windows"])


def _begun(pieces: Iterator[bytes]) -> Iterable[bytes]:
    """Make the first pieces before the answer begins: what fails then is still told as a problem."""
    first = [piece for _, piece in zip(range(2), pieces, strict=False)]
    return chain(first, pieces)


def _json_pieces(parts: ScheduleParts) -> Iterator[bytes]:
    head = _json(parts.head)
    yield head[:-1] + (b"," if parts.head else b"") + b'"assets":['
    separator = b""
    for asset in parts.assets:
        yield separator + _json(asset)
        separator = b","
    yield b"]}\n"


def _json(document: Mapping[str, Any]) -> bytes:
    return json.dumps(document, allow_nan=False, ensure_ascii=False, separators=(",", ":")).encode()


def _require_ended(record: JobRecord) -> None:
    if record.is_live:
        raise HttpProblem(
            "not-finished",
            f"the job is {record.state}",
            headers={"Retry-After": str(SECONDS_BETWEEN_LOOKS)},
            members={"state": record.state, "job": f"{HOME}/{record.id}"},
        )


def _no_schedule(record: JobRecord) -> HttpProblem:
    members: dict[str, Any] = {"state": record.state, "outcome": record.outcome, "job": f"{HOME}/{record.id}"}
    headers = {}
    if record.answer in ("diagnosis", "undecided"):
        members["diagnosis"] = f"{HOME}/{record.id}/diagnosis"
        headers["Link"] = f'<{members["diagnosis"]}>; rel="related"'
    return HttpProblem("no-schedule", _standing(record), headers=headers, members=members)


def _no_diagnosis(record: JobRecord) -> HttpProblem:
    members: dict[str, Any] = {"state": record.state, "outcome": record.outcome, "job": f"{HOME}/{record.id}"}
    if record.answer == "schedule":
        members["schedule"] = f"{HOME}/{record.id}/schedule"
    return HttpProblem("no-diagnosis", _standing(record), members=members)


def _standing(record: JobRecord) -> str:
    return f"the job is {record.state}{f', its outcome {record.outcome}' if record.outcome else ''}"


def _no_such_assets(names: Iterable[str]) -> HttpProblem:
    return invalid_parameters(
        [
            InputFault("parameter", "asset", "unknown-reference", f"the schedule holds no asset `{name}`")
            for name in names
        ]
    )


def operations(backend: Backend) -> list[Operation]:
    """List the endpoints of answers."""
    results = Results(backend)
    one = f"{HOME}/{{id}}"
    unchanged = Success(304, "The caller has this state already", headers=("ETag",))
    return [
        Operation(
            "readSchedule",
            "GET",
            f"{one}/schedule",
            "answers",
            "Read the schedule of a job. It is advisory: protection settings, the battery management system, the "
            "connection agreement and licensed, local practice prevail",
            results.schedule,
            (
                Success(200, "The schedule", {JSON: Schedule, CSV: str}, ("ETag", "Hourwright-Caution")),
                unchanged,
            ),
            ("no-such-job", "job-forgotten", "not-finished", "no-schedule", "precondition-failed", "store-unreachable"),
            (ASSET, ACCEPT_SHORTFALL),
            ("If-None-Match",),
            offers=(JSON, CSV),
        ),
        Operation(
            "readDiagnosis",
            "GET",
            f"{one}/diagnosis",
            "answers",
            "Read why a job cannot be met and what would cure it, or what is known where time ran out",
            results.diagnosis,
            (Success(200, "The diagnosis", {JSON: Diagnosis | Undecided}, ("ETag",)), unchanged),
            (
                "no-such-job",
                "job-forgotten",
                "not-finished",
                "no-diagnosis",
                "precondition-failed",
                "store-unreachable",
            ),
            headers=("If-None-Match",),
        ),
    ]
