"""Signals on both stores: kept by run, in their order, and the same twice over."""

from dataclasses import replace
from datetime import date, timedelta

from rules.records import Ask, Evidence, Signal
from service.store import network, signals
from service.store.base import Store
from tests.builders import FOUNDED, NOW, a_district

HATCH = Signal(
    id="b" * 32,
    district="north",
    kind="hatch",
    rule="redlegged_earth_mite_hatch",
    rule_hash="0" * 32,
    pest="redlegged_earth_mite",
    ask=Ask.LOOK,
    cells=(0x87BEF1C20FFFFFF, -5),  # any 64-bit integers
    paddock=None,
    first_day=date(2026, 4, 7),
    last_day=date(2026, 5, 5),
    figures={"rain_mm": 6.4, "met_day": "2026-04-21", "missing_days": 0},
    evidence=(Evidence("station_day", "st1/2026-04-11", 1, "d" * 32, {"km": 11.1}),),
    as_of=NOW,
)
COUNT = replace(HATCH, id="a" * 32, kind="threshold", ask=Ask.COUNT, paddock="p1", figures={"more_spots": None})


def _with_district(store: Store) -> None:
    with store.writing() as c:
        network.save_district(c, a_district(), FOUNDED)


def test_signals_come_back_as_they_went_in_and_in_order(store: Store) -> None:
    _with_district(store)
    with store.writing() as c:
        assert signals.save(c, [HATCH, COUNT]) == 2
    with store.reading() as c:
        assert signals.read(c, "north", NOW) == [HATCH, COUNT]


def test_the_same_run_twice_adds_nothing(store: Store) -> None:
    _with_district(store)
    with store.writing() as c:
        signals.save(c, [HATCH])
        assert signals.save(c, [HATCH, COUNT]) == 1
        assert signals.save(c, []) == 0
    with store.reading() as c:
        assert signals.read(c, "north", NOW) == [HATCH, COUNT]


def test_each_run_keeps_its_own(store: Store) -> None:
    _with_district(store)
    later = replace(HATCH, as_of=NOW + timedelta(days=7))
    with store.writing() as c:
        signals.save(c, [HATCH])
        signals.save(c, [later])
    with store.reading() as c:
        assert signals.read(c, "north", NOW) == [HATCH]
        assert signals.read(c, "north", NOW + timedelta(days=7)) == [later]
        assert signals.read(c, "north", NOW + timedelta(days=3)) == []
        assert signals.read(c, "south", NOW) == []
