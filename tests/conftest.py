"""Tests assert behaviour, never elapsed time: hypothesis sets no deadline."""

from collections.abc import Iterator

import pytest
from hypothesis import settings

from tests.postgresql import Server, running_server

settings.register_profile("house", deadline=None)
settings.load_profile("house")


@pytest.fixture(scope="session")
def postgresql_server() -> Iterator[Server]:
    """A server of PostgreSQL of this process, started when first asked for."""
    with running_server() as server:
        yield server


def pytest_collection_modifyitems(config: pytest.Config, items: list[pytest.Item]) -> None:
    """What takes minutes runs when it is asked for: `pytest -m full`."""
    if "full" in config.getoption("markexpr"):
        return
    for item in items:
        if item.get_closest_marker("full"):
            item.add_marker(pytest.mark.skip(reason="takes minutes: pytest -m full"))
