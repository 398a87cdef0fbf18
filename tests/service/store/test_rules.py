"""Versions of rules on both stores: a change adds one, and the past reads as it was."""

from dataclasses import replace
from datetime import timedelta

import pytest

from rules.book import Sourced
from service.errors import WrongState
from service.rulebook import load, revise
from service.store import rules
from service.store.base import Store
from tests.builders import NOW

DAY = timedelta(days=1)
SHIPPED = next(rule for rule in load().rules if rule.id == "redlegged_earth_mite_hatch")
COOLER = revise(
    SHIPPED,
    {"cool_below_south_eastern": Sourced(15.5, "C", "common practice here, no source")},
    by="ivy",
    why="Cooler ground near the coast.",
    made_at=NOW,
)
LATER = revise(
    COOLER,
    {"cool_below_south_eastern": Sourced(15.0, "C", "common practice here, no source")},
    by="ivy",
    why="Cooler still.",
    made_at=NOW + 2 * DAY,
)


def test_the_newest_version_made_by_a_moment_comes_back_whole(store: Store) -> None:
    with store.writing() as c:
        rules.save_version(c, COOLER)
        rules.save_version(c, LATER)
    with store.reading() as c:
        assert rules.versions(c, NOW - DAY) == []
        assert rules.versions(c, NOW) == [COOLER]
        assert rules.versions(c, NOW + 2 * DAY) == [LATER]


def test_a_version_is_never_overwritten(store: Store) -> None:
    with store.writing() as c:
        rules.save_version(c, COOLER)
    with store.writing() as c, pytest.raises(WrongState, match="is at version 2 already"):
        rules.save_version(c, replace(COOLER, why="Another reason."))
    with store.reading() as c:
        assert rules.versions(c, NOW) == [COOLER]
