"""Stations, their days by version, and blocks, on both stores."""

from dataclasses import replace
from datetime import date, timedelta

import pytest

from rules.records import Station, StationDay
from service.places import place
from service.store import network, weather
from service.store.base import Store
from tests.builders import FOUNDED, LAT, LON, NOW, a_district

DAY = date(2026, 5, 1)
LATER = NOW + timedelta(days=3)


def a_station(id: str = "w1", **changes) -> Station:
    return Station(
        **({"id": id, "district": "north", "name": f"Station {id}", "place": place(LAT, LON, None, 5.0)} | changes)
    )


def a_day(station: str = "w1", day: date = DAY, **changes) -> StationDay:
    values = {"version": 1, "tmin": 6.0, "tmax": 17.5, "rain": 0.0, "arrived_at": NOW, "knowable_from": NOW}
    record = StationDay(station=station, day=day, digest="", **(values | changes))
    return replace(record, digest=weather.content_digest(record))


@pytest.fixture
def ready(store: Store) -> Store:
    with store.writing() as c:
        network.save_district(c, a_district(), FOUNDED)
        network.save_district(c, a_district(id="south"), FOUNDED)
        ours = [a_station("w2"), a_station("w1", attribution="the bank's own"), a_station("x", district="south")]
        weather.save_stations(c, ours, FOUNDED)
    return store


def add(store: Store, *records: StationDay, **options) -> dict[str, int]:
    with store.writing() as c:
        return weather.add_station_days(c, records, **options)


def known(store: Store, as_of, first=DAY, last=DAY, district="north") -> list[StationDay]:
    with store.reading() as c:
        return weather.station_days(c, district, as_of, first, last)


def test_stations_come_back_by_id_as_they_were_known(ready: Store) -> None:
    first = [a_station("w1", attribution="the bank's own"), a_station("w2")]
    with ready.writing() as c:
        assert weather.stations(c, "north", NOW) == first
        assert weather.save_stations(c, first, LATER) == 0
        assert weather.save_stations(c, [a_station("w2", name="Moved"), a_station("w3")], LATER) == 2
        later = [station.name for station in weather.stations(c, "north", LATER)]
        assert later == ["Station w1", "Moved", "Station w3"]
        assert weather.stations(c, "north", LATER - timedelta(microseconds=1)) == first
        assert weather.stations(c, "north", FOUNDED - timedelta(microseconds=1)) == []


def test_the_days_of_a_station_are_read_where_it_was_known_to_stand(ready: Store) -> None:
    add(ready, a_day("w2"))
    with ready.writing() as c:
        assert weather.save_stations(c, [a_station("w2", district="south")], LATER) == 1
    assert known(ready, NOW) == [a_day("w2")]
    assert known(ready, LATER) == []
    assert known(ready, LATER, district="south") == [a_day("w2")]


def test_the_same_values_add_nothing(ready: Store) -> None:
    assert add(ready, a_day(), a_day("w2", rain=None)) == {"new": 2, "corrected": 0, "same": 0}
    assert add(ready, a_day(arrived_at=LATER, knowable_from=LATER), a_day("w2", rain=None)) == {
        "new": 0,
        "corrected": 0,
        "same": 2,
    }
    assert known(ready, LATER) == [a_day(), a_day("w2", rain=None)]


def test_whole_numbers_are_the_same_values_as_decimals(ready: Store) -> None:
    add(ready, a_day(tmin=6))
    assert add(ready, a_day(tmin=6.0))["same"] == 1


def test_a_correction_leaves_the_past_as_it_was_known(ready: Store) -> None:
    add(ready, a_day())
    corrected = a_day(rain=12.4, arrived_at=LATER, knowable_from=LATER)
    assert add(ready, corrected) == {"new": 0, "corrected": 1, "same": 0}
    assert known(ready, NOW - timedelta(microseconds=1)) == []
    assert known(ready, LATER - timedelta(microseconds=1)) == [a_day()]
    assert known(ready, LATER) == [replace(corrected, version=2)]
    with ready.reading() as c:
        assert weather.get_station_day(c, "w1", DAY, 1) == a_day()
        assert weather.get_station_day(c, "w1", DAY, 2) == replace(corrected, version=2)
        assert weather.get_station_day(c, "w1", DAY, 3) is None


def test_a_correction_is_not_knowable_before_it_was_made(ready: Store) -> None:
    early = NOW - timedelta(days=7)
    add(ready, a_day())
    add(ready, a_day(rain=1.0, arrived_at=early, knowable_from=early))
    add(ready, a_day(rain=2.0, arrived_at=early, knowable_from=early), corrected_at=LATER)
    assert [day.rain for day in known(ready, NOW - timedelta(days=1))] == []
    assert [day.rain for day in known(ready, NOW)] == [1.0]
    assert [day.rain for day in known(ready, LATER)] == [2.0]


def test_a_value_taken_back_is_a_correction_to_missing(ready: Store) -> None:
    add(ready, a_day())
    assert add(ready, a_day(rain=None, knowable_from=LATER))["corrected"] == 1
    assert [day.rain for day in known(ready, LATER)] == [None]


def test_only_the_days_and_the_district_asked_for_come_back(ready: Store) -> None:
    days = [a_day(name, DAY + timedelta(days=n)) for name in ("x", "w2", "w1") for n in range(3)]
    add(ready, *days)
    found = known(ready, NOW, DAY + timedelta(days=1), DAY + timedelta(days=2))
    assert [(day.station, (day.day - DAY).days) for day in found] == [("w1", 1), ("w1", 2), ("w2", 1), ("w2", 2)]
    assert [day.station for day in known(ready, NOW, district="south")] == ["x"]


def test_the_digest_covers_what_was_reported_and_not_when(ready: Store) -> None:
    base = weather.content_digest(a_day())
    assert weather.content_digest(a_day(arrived_at=LATER, knowable_from=LATER, version=4)) == base
    changes = [{"tmin": 6.1}, {"tmax": 17.6}, {"rain": None}, {"station": "w2"}, {"day": DAY + timedelta(days=1)}]
    digests = {weather.content_digest(a_day(**change)) for change in changes}
    assert len(digests | {base}) == 6


def test_a_block_is_kept_and_replaced_by_its_key(ready: Store) -> None:
    block = weather.Block("k", "north", date(2026, 5, 1), "rain", "c1", b"\x00\x01")
    with ready.writing() as c:
        weather.save_blocks(c, [block, replace(block, key="other")])
        weather.save_blocks(c, [replace(block, content="c2", data=b"\x02")])
    with ready.reading() as c:
        assert weather.blocks(c, ["k", "none"]) == {"k": replace(block, content="c2", data=b"\x02")}
