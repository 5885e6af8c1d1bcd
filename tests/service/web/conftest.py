"""One server for all tests of a module; jobs and documents of one test do not matter to another."""

from collections.abc import Iterator

import pytest

from tests.service.web.live import House, served


@pytest.fixture(scope="module")
def house() -> Iterator[House]:
    with served() as found:
        yield found
