"""A deployment of its own for each test: what breaks one must not help another."""

from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.faults.deployment import Deployment


@pytest.fixture
def house(tmp_path: Path) -> Iterator[Deployment]:
    deployment = Deployment(tmp_path)
    try:
        yield deployment
    finally:
        deployment.close()
