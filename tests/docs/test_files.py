"""The page on files names every column that can be taken, and no others."""

import re
from pathlib import Path

from service.intake.kinds import NETWORK
from service.intake.observation import Observation
from service.settings import table
from service.weather import station_file

ROOT = Path(__file__).parents[2]
PAGE = (ROOT / "docs/files.md").read_text(encoding="utf-8")
LISTED = set(re.findall(r"`([a-z_0-9]+)`", PAGE))


def test_every_column_is_named() -> None:
    columns = {name for kind in NETWORK.values() for name in (*kind.required, *kind.optional)}
    columns |= set(Observation.model_fields) | {"station", "day", *station_file.OPTIONAL}
    assert columns <= LISTED


def test_every_network_file_is_listed_with_its_own_columns() -> None:
    for kind, columns in NETWORK.items():
        line = next(line for line in PAGE.splitlines() if line.startswith(f"| {kind} |"))
        assert set(re.findall(r"`(\w+)`", line)) == {*columns.required, *columns.optional}
        assert set(re.findall(r"`(\w+)`\*", line)) == set(columns.required)


def test_the_settings_page_is_the_file_that_init_writes() -> None:
    page = (ROOT / "docs/settings.md").read_text(encoding="utf-8")
    for name, _, default, words in table():
        assert f"`{name}`" in page, name
        assert words in page, name
        assert str(default) in page, name
