"""Stores for the tests of the pages."""

from collections.abc import Iterator
from pathlib import Path

import pytest
from web.builders import Hub, a_hub, ridge


@pytest.fixture
def hub(tmp_path: Path) -> Iterator[Hub]:
    """An empty hub."""
    found = a_hub(tmp_path)
    yield found
    found.database.close()


@pytest.fixture(scope="session")
def shown(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Hub]:
    """A hub with one node and some days; tests only look at it."""
    found = a_hub(tmp_path_factory.mktemp("shown"))
    found.load(ridge())
    found.simulate("ridge-east", 8)
    found.account()
    yield found
    found.database.close()
