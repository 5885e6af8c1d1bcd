"""Serve on stores in memory until SIGTERM: a process of its own for tests of signals and logs. Prints its port."""

import sys

from service.web.application import create_app
from service.web.logs import log_as_json_lines
from service.web.server import run
from tests.service.fakes import FakeDocumentStore, FakeJobStore
from tests.service.web.live import SMALL


def main() -> int:
    """Serve; the exit status is that of the runner."""
    log_as_json_lines()
    app = create_app(SMALL, FakeJobStore(), FakeDocumentStore())
    return run(app, SMALL, lambda port: print(port, flush=True))


if __name__ == "__main__":
    sys.exit(main())
