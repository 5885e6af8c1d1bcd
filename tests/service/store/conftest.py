"""A Redis of their own for the tests of a module, empty before each of them."""

from collections.abc import Iterator

import pytest

from tests.faults.deployment import Deployment


@pytest.fixture(scope="module")
def house(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Deployment]:
    deployment = Deployment(tmp_path_factory.mktemp("house"))
    try:
        yield deployment
    finally:
        deployment.close()


@pytest.fixture
def empty(house: Deployment) -> Deployment:
    house.client.flushall()
    return house
