"""Put the endpoints together: routes, the checks every request passes, and what every answer carries."""

import re
import secrets
from collections.abc import Callable, Sequence
from datetime import UTC, datetime
from threading import Event
from time import monotonic
from typing import Any

from flask import Flask, Response, g, request
from werkzeug.exceptions import HTTPException, MethodNotAllowed
from werkzeug.routing import BaseConverter

from schemas.problems import RefusedError
from service.store import DocumentStore, JobForgotten, JobStore, StoreFull, StoreUnreachable
from service.web import jobs, openapi, results, status, stored_documents
from service.web.answers import SECONDS_UNTIL_THE_STORE_IS_BACK, SHOWN_TO_PROGRAMS, accepted, problem_answer
from service.web.bodies import Bodies
from service.web.logs import FAULTS, REQUESTS
from service.web.operations import Backend, Call, Operation, Waiters
from service.web.parameters import read_query, require_host
from service.web.problems import AnyProblemType, HttpProblem, refusal
from service.web.settings import WebSettings

_REQUEST_ID = re.compile(r"[A-Za-z0-9._-]{1,128}")
_OWN_WORDS: dict[int, tuple[AnyProblemType, str]] = {
    404: ("not-found", "there is nothing at this address"),
    405: ("method-not-allowed", "this method is not offered here"),
    413: ("body-too-large", "the body is larger than the server takes"),
}


class JobId(BaseConverter):
    """Any segment where a job's id stands, but for the word that is an address of its own there."""

    regex = "(?!validate$)[^/]+"
    part_isolating = True


class Application(Flask):
    """The WSGI application; `operations` are its endpoints, `draining` makes it report that it is ending."""

    operations: tuple[Operation, ...] = ()
    draining: Event

    def make_default_options_response(self) -> Response:
        """Answer OPTIONS with the methods of an address, and nothing else."""
        allowed = super().make_default_options_response().headers["Allow"]
        return Response(status=204, headers={"Allow": allowed})


def create_app(
    settings: WebSettings,
    job_store: JobStore,
    document_store: DocumentStore,
    now: Callable[[], datetime] = lambda: datetime.now(UTC),
) -> Application:
    """Make the WSGI application on two stores."""
    app = Application("hourwright", static_folder=None)
    app.config["PROPAGATE_EXCEPTIONS"] = False
    app.url_map.strict_slashes = True
    app.url_map.converters["job"] = JobId
    app.url_map.merge_slashes = False  # A redirect would be an answer that is no problem document.
    app.draining = Event()
    backend = Backend(
        settings=settings,
        jobs=job_store,
        documents=document_store,
        bodies=Bodies(settings),
        waiters=Waiters(job_store, settings, app.draining),
        draining=app.draining,
    )
    app.operations = (
        *stored_documents.operations(backend),
        *jobs.operations(backend, now),
        *results.operations(backend),
        *status.operations(backend),
        openapi.operation(lambda: app.operations),
    )
    _route(app, app.operations)
    app.before_request(lambda: _check(settings))
    app.after_request(_finished)
    app.register_error_handler(Exception, _problem)
    return app


def _route(app: Flask, operations: Sequence[Operation]) -> None:
    for operation in operations:
        rule = operation.path.replace(f"{jobs.HOME}/{{id}}", f"{jobs.HOME}/<job:id>")
        rule = rule.replace("{", "<").replace("}", ">")
        app.add_url_rule(rule, operation.name, _view(operation), methods=[operation.method])


def _view(operation: Operation) -> Callable[..., Response]:
    def view(**path: str) -> Response:
        media = accepted(request, operation.offers)
        query = read_query(request.args, operation.query)
        return operation.answer(Call(request, media, query, path))

    return view


def _check(settings: WebSettings) -> None:
    """Make what every request passes before its endpoint is looked at."""
    g.started = monotonic()
    _request_id()
    environ = request.environ
    require_host(environ.get("HTTP_HOST"), environ.get("SERVER_PROTOCOL", ""), settings.allowed_hosts)
    target = len(environ.get("PATH_INFO", "")) + len(environ.get("QUERY_STRING", ""))
    if max(target, len(environ.get("REQUEST_URI", ""))) > settings.max_uri_bytes:
        raise HttpProblem("uri-too-long", f"the request target is longer than {settings.max_uri_bytes} bytes")
    if sum(len(name) + len(value) + 4 for name, value in request.headers) > settings.max_header_bytes:
        raise HttpProblem("headers-too-large", f"the headers are longer than {settings.max_header_bytes} bytes")


def _request_id() -> str:
    """Take the caller's id for this request if it is fit to be written down, else make one."""
    if "request_id" not in g:
        given = request.headers.get("X-Request-Id", "")
        g.request_id = given if _REQUEST_ID.fullmatch(given) else secrets.token_hex(16)
    return str(g.request_id)


def _problem(fault: Exception) -> Response:
    """Turn whatever ended a request into a problem document; a defect of ours shows as an id and a log line only."""
    return problem_answer(_as_problem(fault), _request_id())


def _as_problem(fault: Exception) -> HttpProblem:
    if isinstance(fault, HttpProblem):
        return fault
    if isinstance(fault, RefusedError):
        return refusal(fault)
    if isinstance(fault, StoreFull):
        headers = {"Retry-After": str(fault.retry_after_seconds)}
        return HttpProblem("store-full", fault.why, headers=headers)
    if isinstance(fault, StoreUnreachable):
        headers = {"Retry-After": str(SECONDS_UNTIL_THE_STORE_IS_BACK)}
        return HttpProblem("store-unreachable", "nothing was done; ask again", headers=headers)
    if isinstance(fault, JobForgotten):  # between two reads of one answer
        return HttpProblem("job-forgotten", "the job was forgotten while it was read")
    if isinstance(fault, HTTPException) and fault.code is not None and 400 <= fault.code < 500:
        kind, detail = _OWN_WORDS.get(fault.code, ("bad-request", "the request is not well-formed"))
        methods = fault.valid_methods if isinstance(fault, MethodNotAllowed) else None
        return HttpProblem(kind, detail, headers={"Allow": ", ".join(sorted(methods))} if methods else None)
    FAULTS.error("a request failed", exc_info=fault, extra={"fields": {"request_id": _request_id()}})
    return HttpProblem("internal", "the request id leads to what happened")


def _finished(response: Response) -> Response:
    request_id = _request_id()
    for name, value in SHOWN_TO_PROGRAMS.items():
        response.headers.setdefault(name, value)
    response.headers["X-Request-Id"] = request_id
    if response.status_code == 204 or response.status_code == 304:
        response.headers.pop("Content-Type", None)
    fields: dict[str, Any] = {
        "request_id": request_id,
        "method": request.method[:20],
        "route": str(request.url_rule) if request.url_rule else None,
        "status": response.status_code,
        "caller": request.remote_addr,
    }
    started = g.get("started", None)

    def log() -> None:
        if started is not None:
            fields["seconds"] = round(monotonic() - started, 6)
        REQUESTS.info("request", extra={"fields": fields})

    response.call_on_close(log)
    return response
