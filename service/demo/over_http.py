"""The whole demo: a service of its own, three jobs over HTTP, and the answers left in a folder."""

import sys
from datetime import datetime
from pathlib import Path
from typing import TextIO

from service.demo.answering import Answering
from service.demo.folder import CannotKeep, Folder
from service.demo.own_service import ServiceFault, ended_by_signals, own_service
from service.demo.page import Page
from service.demo.running import run


def demo(stream: TextIO, out: Path | None, now: datetime) -> int:
    """Run it and return the exit status; `out` is where the answers are left, None: a new folder in the current one.

    0 only if everything held, 1 where something did not, 2 where it could not begin.
    """
    try:
        folder = Folder.made(out, now)
    except CannotKeep as refusal:
        print(f"hourwright demo: {refusal}", file=sys.stderr)
        return 2
    page = Page(stream)
    status = 1
    try:
        with ended_by_signals():
            page.words("Starting a service for this demo alone: Redis, API, keeper and workers, on this machine ...")
            with own_service() as api:
                page.words(
                    f"It is ready at {api.url}. Three jobs go there over HTTP, each when the one before is shown."
                )
                page.table([""])
                status = run(page, Answering(api, folder).answer)
    except ServiceFault as fault:
        status = 1
        page.title("NOT EVERYTHING HELD")
        page.words(f"- {fault}")
    finally:
        folder.leave()
    page.words(*_left(folder))
    return status


def _left(folder: Folder) -> list[str]:
    if not folder.names:
        return ["The service has ended; there was no answer to leave."]
    return [
        f"The service has ended, and its data are removed. Left in {folder.path}:",
        *(f"- {name}" for name in sorted(folder.names)),
    ]
