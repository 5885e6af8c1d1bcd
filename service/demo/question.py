"""Put a question to the service, and a title over what it answers."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Protocol

from schemas.job import ScheduleJob
from schemas.reading import read_job
from service.demo.answering import Reply
from service.demo.page import Page

Document = dict[str, Any]


class Answer(Protocol):
    """Answer a job document; `patch` is what has made it from an earlier one."""

    def __call__(self, job: Document, patch: Sequence[Document] = (), /) -> Reply: ...  # noqa: D102 - said above


@dataclass(frozen=True)
class Asked:
    """A question, and what was said to it."""

    job: ScheduleJob
    reply: Reply

    @property
    def outcome(self) -> str:
        """Tell how it ended."""
        return str(self.reply.answer["outcome"])


def ask(page: Page, answer: Answer, request: Document, what: str, patch: Sequence[Document] = ()) -> Asked:
    """Print what is asked, and ask it."""
    job = read_job(request)
    if not isinstance(job, ScheduleJob) or job.window is None or job.fleet is None:
        raise ValueError("the scenario asks for a schedule, with fleet and window inline")
    page.title(f"{job.fleet.name}: {what}")
    page.words(
        f"{job.label}, {job.window.start:%A %Y-%m-%d}, {job.window.timezone} time, {job.window.intervals} intervals of "
        f"{job.window.interval.total_seconds() / 60:g} minutes. An invented fleet."
    )
    return Asked(job, answer(request, patch))
