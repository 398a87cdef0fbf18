"""Fixtures that every folder shares: a new, empty store of each kind."""

from collections.abc import Iterator
from pathlib import Path

import pytest

from service.store.base import Store, metadata
from tests import postgres


@pytest.fixture(scope="session")
def postgres_server() -> Iterator[str]:
    with postgres.server() as url:
        yield url


@pytest.fixture(params=["sqlite", "postgresql"])
def store_url(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[str]:
    """The URL of an empty database; every test that asks for it runs on both stores."""
    if request.param == "sqlite":
        yield f"sqlite:///{tmp_path / 'store.db'}"
        return
    with postgres.database(request.getfixturevalue("postgres_server")) as url:
        yield url


@pytest.fixture
def store(store_url: str) -> Iterator[Store]:
    """An open store with all tables."""
    opened = Store.open(store_url)
    metadata.create_all(opened.engine)
    yield opened
    opened.close()
