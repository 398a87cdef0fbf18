"""The invented network, built once with everything planted, and once without each event."""

from collections.abc import Callable
from pathlib import Path

import pytest

from demo_network.build import build


@pytest.fixture(scope="session")
def files(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The files as they ship."""
    folder = tmp_path_factory.mktemp("network")
    build(folder)
    return folder


@pytest.fixture(scope="session")
def files_without(tmp_path_factory: pytest.TempPathFactory) -> Callable[..., Path]:
    """The files with the named events left out; each set is built once."""
    made: dict[frozenset[str], Path] = {}

    def without(*names: str) -> Path:
        left_out = frozenset(names)
        if left_out not in made:
            made[left_out] = tmp_path_factory.mktemp("without")
            build(made[left_out], without=left_out)
        return made[left_out]

    return without
