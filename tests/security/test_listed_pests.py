"""A listed pest by whatever door: the hotline first, the closed table, and not a word anywhere else."""

from dataclasses import replace
from datetime import date
from pathlib import Path

import pytest

from rules.records import Reportable
from service import pipeline
from service.clock import SetClock
from service.errors import BadInput
from service.store import network, reportables
from service.store.base import Store
from tests import small_network
from tests.builders import FOUNDED, a_district

CLOCK = SetClock(small_network.CUT_OFF)


@pytest.mark.parametrize(
    ("name", "text"),
    [
        ("notes.txt", "ghost beetle by the silo\n"),
        ("ghost beetle.jpg", "\x00\x01"),
        ("odd.csv", "when,what\ntoday,ghost beetle\n"),
        ("days.csv", "station,day,rain\nghost beetle,2026-05-10,x\n"),
        ("readers.csv", "id,district,email,name,postcode,crops,consent\ns9,north,x,Ghost beetle,9001,,yes\n"),
    ],
)
def test_whatever_can_not_be_taken_is_searched_first(store: Store, tmp_path: Path, name: str, text: str) -> None:
    _list_a_pest(store)
    (tmp_path / name).write_text(text, encoding="utf-8")
    with pytest.raises(BadInput) as caught:
        pipeline.take(store, tmp_path / name, clock=CLOCK)
    assert str(caught.value).startswith("Please ring the invented plant health line now")
    assert "beetle" not in f"{caught.value} {caught.value.refusals}"
    with store.reading() as c:
        assert len(reportables.cases(c, "north")) == 1


def test_the_hotline_comes_before_all_else_and_the_files_name_not_at_all(store: Store, tmp_path: Path) -> None:
    _list_a_pest(store)
    path = tmp_path / "ghost beetle.csv"
    path.write_text("day,pest,status,reporter,paddock\n2026-05-10,rlem,present,ivy,p1\n", encoding="utf-8")
    outcome = pipeline.take(store, path, clock=CLOCK)
    assert next(iter(outcome)) == "to_the_hotline"
    assert outcome["to_the_hotline"].startswith("Please ring")
    assert "ghost" not in str(outcome)


def _list_a_pest(store: Store) -> None:
    listed = (Reportable("ghost", ("ghost beetle",), date(2026, 1, 1)),)
    small_network.fill(store)
    with store.writing() as c:
        network.save_district(c, replace(a_district(), reportables=listed), FOUNDED)
