"""Put the sample into a running service, over HTTP, and say how to use it."""

import json
import shlex
from collections.abc import Iterator

from service.calling import Answered, Api
from service.sample.trials import Loaded, Trial, documents, trials

STORED = (200, 201)
THERE_ALREADY = 412


class NotTaken(RuntimeError):  # noqa: N818 - says what it is
    """The service did not store a document of the sample; the message has its answer."""


def load(api: Api) -> Iterator[str]:
    """Store what is not there yet, and give a line for each document and a command for each job.

    What is there under the same name stays as it is. Raises NotTaken, and service.calling.NotReached.
    """
    yield "Sample, all of it invented:"
    for document in documents():
        yield f"  {_line(document, is_new=_stored(api, document))}"
    for trial in trials():
        yield f"# {trial.tries} ({trial.expect}):"
        yield command(api, trial)


def command(api: Api, trial: Trial) -> str:
    """Write the command that submits a job; AUTH is the header that says who asks, where one is needed."""
    job = json.dumps(trial.job, separators=(",", ":"))
    headers = "-H \"$AUTH\" -H 'Content-Type: application/json' -H 'Prefer: wait=30'"
    return f"curl -sS {api.url}/v1/jobs {headers} -d {shlex.quote(job)}"


def _stored(api: Api, document: Loaded) -> bool:
    """Store all revisions of a document, unless there is one of its name; tell whether they were."""
    place = f"/v1/{document.kind}s/{document.id}"
    first, *later = document.revisions
    answered = api.ask("PUT", place, first, If_None_Match="*")
    if answered.status == THERE_ALREADY:
        return False
    _require_stored(answered, document)
    for revision in later:
        answered = api.ask("PUT", place, revision, If_Match=answered.headers["etag"])
        _require_stored(answered, document)
    return True


def _require_stored(answered: Answered, document: Loaded) -> None:
    if answered.status not in STORED:
        words = answered.body.decode(errors="replace").strip()
        raise NotTaken(f"{document.kind} {document.id} is answered {answered.status}: {words}")


def _line(document: Loaded, *, is_new: bool) -> str:
    kept = "" if is_new else " (one of this name was there and is kept)"
    return f"{document.kind:6} {document.id:18} {document.says}{kept}"
