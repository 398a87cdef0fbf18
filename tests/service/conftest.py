"""A week to test with: a small district, the clock at its cut-off, settings in a folder of their own."""

from pathlib import Path

import pytest

from service.clock import SetClock
from service.settings import Settings
from service.store.base import Store
from tests import small_network


@pytest.fixture
def clock() -> SetClock:
    return SetClock(small_network.CUT_OFF)


@pytest.fixture
def full(store: Store) -> Store:
    small_network.fill(store)
    return store


@pytest.fixture
def settings(tmp_path: Path) -> Settings:
    return Settings(data_dir=str(tmp_path), keys_file=str(tmp_path / "keys"))
