"""Cell days on both stores: what was known when, missing values, and blocks that are reused or mended."""

import math
from datetime import date, timedelta

import numpy as np
import pytest
from sqlalchemy import update

from rules.records import CellDays, Station, StationDay
from service.places import EARTH_RADIUS_KM, centre, place
from service.store import network, weather
from service.store.base import Store
from service.weather import blocks, cell_days, cells
from tests.builders import FOUNDED, LAT, LON, NOW, a_district, a_holding, a_paddock, a_postcode

FIRST, LAST = date(2026, 4, 28), date(2026, 5, 3)  # touches two months
LATER = NOW + timedelta(days=2)
HOME = a_paddock().place
DISTRICT = a_district()


def a_station(id: str, km_north: float, height: float | None = None) -> Station:
    base = centre(HOME.cell)
    return Station(
        id, "north", id, place(base[0] + math.degrees(km_north / EARTH_RADIUS_KM), base[1], elevation_m=height)
    )


def a_day(station: str, day: date, tmin=5.0, tmax=15.0, rain=0.0, at=NOW) -> StationDay:
    return StationDay(station, day, 1, tmin, tmax, rain, at, at, "")


def add(store: Store, *records: StationDay) -> None:
    with store.writing() as c:
        weather.add_station_days(c, records)


@pytest.fixture
def ready(store: Store) -> Store:
    """One paddock at 10 m, two stations at 10 m, 10 and 20 km away, and a postcode a degree to the west."""
    with store.writing() as c:
        network.save_district(c, DISTRICT, FOUNDED)
        network.save_holdings(c, [a_holding()], FOUNDED)
        network.save_paddocks(c, [a_paddock()], NOW)
        network.save_postcodes(c, [a_postcode(place=place(LAT, LON - 1))], FOUNDED)
        weather.save_stations(c, [a_station("a", 10, 10.0), a_station("b", -20, 10.0)], FOUNDED)
    days = [FIRST + timedelta(days=n) for n in range(6)]
    add(store, *(a_day("a", day, 10.0, 20.0, 5.0) for day in days), *(a_day("b", day, 20.0, 30.0, 0.0) for day in days))
    return store


def at_home(found: CellDays) -> int:
    return list(found.cells).index(HOME.cell)


def read(store: Store, as_of=NOW) -> CellDays:
    found = cell_days(store, DISTRICT, as_of, FIRST, LAST)
    assert found is not None
    return found


def kept(store: Store) -> dict[tuple[date, str, str], bytes]:
    with store.reading() as c:
        rows = c.execute(weather.weather_block.select()).all()
    return {(row.month, row.variable, row.key): row.data for row in rows}


def test_days_and_cells_by_hand(ready: Store) -> None:
    found = read(ready)
    assert (found.district, found.first_day) == ("north", FIRST)
    assert found.tmin.shape == found.tmax.shape == found.rain.shape == (6, 14)  # two places, six neighbours each
    assert found.tmin.dtype == found.rain.dtype == np.float32
    # by hand: shares 0.8 and 0.2 (1/100 and 1/400): 0.8*10 + 0.2*20, 0.8*20 + 0.2*30, 0.8*5
    here = at_home(found)
    assert found.tmin[:, here] == pytest.approx([12.0] * 6, abs=1e-4)
    assert found.tmax[:, here] == pytest.approx([22.0] * 6, abs=1e-4)
    assert found.rain[:, here] == pytest.approx([4.0] * 6, abs=1e-4)
    assert found.tmean[:, here] == pytest.approx([17.0] * 6, abs=1e-4)


def test_without_stations_or_places_there_is_no_weather(store: Store) -> None:
    with store.writing() as c:
        network.save_district(c, DISTRICT, FOUNDED)
        network.save_postcodes(c, [a_postcode()], FOUNDED)
    assert cell_days(store, DISTRICT, NOW, FIRST, LAST) is None
    with store.writing() as c:
        network.save_district(c, a_district(id="south"), FOUNDED)
        weather.save_stations(c, [Station("x", "south", "x", place(LAT, LON))], FOUNDED)
    assert cell_days(store, a_district(id="south"), NOW, FIRST, LAST) is None


def test_stations_without_a_day_give_missing_and_never_zero(store: Store) -> None:
    with store.writing() as c:
        network.save_district(c, DISTRICT, FOUNDED)
        network.save_postcodes(c, [a_postcode()], FOUNDED)
        weather.save_stations(c, [a_station("a", 10)], FOUNDED)
    found = cell_days(store, DISTRICT, NOW, FIRST, LAST)
    assert np.isnan(found.tmin).all()
    assert np.isnan(found.rain).all()


def test_a_missing_value_leaves_the_day_to_the_others(ready: Store) -> None:
    add(ready, a_day("a", FIRST, None, 20.0, None, LATER), a_day("b", FIRST + timedelta(days=1), rain=None, at=LATER))
    found = read(ready, LATER)
    here = at_home(found)
    # a day's maximum counts only with its minimum, so that the two rest on the same stations
    assert [float(array[0, here]) for array in (found.tmin, found.tmax, found.rain)] == pytest.approx([20.0, 30.0, 0.0])
    assert found.rain[1, here] == pytest.approx(5.0)


def test_minimum_and_maximum_never_cross(ready: Store) -> None:
    days = [FIRST + timedelta(days=n) for n in range(6)]
    add(ready, *(a_day("a", day, None, 9.0, at=LATER) for day in days))
    add(ready, *(a_day("b", day, 8.0, 8.0, at=LATER) for day in days))
    found = read(ready, LATER)
    assert (found.tmin <= found.tmax).all()


def test_a_later_correction_does_not_change_what_was_known(ready: Store) -> None:
    before = read(ready)
    add(ready, a_day("a", LAST, 10.0, 20.0, 25.0, LATER))
    again, corrected = read(ready), read(ready, LATER)
    assert again.digest == before.digest
    for name in ("cells", "tmin", "tmax", "rain"):
        assert getattr(again, name).tobytes() == getattr(before, name).tobytes()
    assert corrected.digest != before.digest
    # by hand: 0.8 * 25
    assert corrected.rain[-1, at_home(corrected)] == pytest.approx(20.0, abs=1e-3)
    assert corrected.tmin.tobytes() == before.tmin.tobytes()


def test_a_month_that_has_not_changed_is_not_worked_out_twice(ready: Store, monkeypatch: pytest.MonkeyPatch) -> None:
    worked: list[int] = []
    real = cells.interpolate
    monkeypatch.setattr(cells, "interpolate", lambda *a, **k: worked.append(1) or real(*a, **k))
    read(ready)
    assert len(worked) == 6  # two months, three variables
    first = kept(ready)
    read(ready)
    assert len(worked) == 6
    add(ready, a_day("a", LAST, 10.0, 20.0, 25.0, LATER))
    read(ready, LATER)
    assert len(worked) == 7  # only May's rain changed
    assert {key: kept(ready)[key] for key in first} == first
    assert [(month, variable) for month, variable, _ in kept(ready).keys() - first.keys()] == [
        (date(2026, 5, 1), "rain")
    ]


def test_a_changed_height_makes_other_temperature_blocks(ready: Store) -> None:
    before = read(ready)
    with ready.writing() as c:
        weather.save_stations(c, [a_station("a", 10, 210.0)], LATER)
    after = read(ready, LATER)
    # by hand: a is now 200 m above the paddock: 6.5 * 0.2 = 1.3 °C, times its share 0.8
    here = at_home(after)
    assert after.tmin[:, here] - before.tmin[:, here] == pytest.approx([1.04] * 6, abs=1e-4)
    assert after.rain.tobytes() == before.rain.tobytes()
    assert read(ready).digest == before.digest, "what was known before must stay"


@pytest.mark.parametrize("harm", ["flip", "cut", "swap", "empty"])
def test_an_altered_block_is_found_and_worked_out_again(ready: Store, harm: str) -> None:
    before, good = read(ready), kept(ready)
    (_, _, key), data = next((name, data) for name, data in good.items() if name[:2] == (date(2026, 5, 1), "rain"))
    other = next(data for name, data in good.items() if name[2] != key)
    harmed = {"flip": data[:-1] + bytes([data[-1] ^ 1]), "cut": data[:-5], "swap": other, "empty": b""}[harm]
    with ready.writing() as c:
        table = weather.weather_block
        c.execute(update(table).where(table.c.key == key).values(data=harmed))
    assert read(ready).digest == before.digest
    assert kept(ready) == good


def test_a_block_moved_to_another_name_is_not_taken_for_it(ready: Store) -> None:
    read(ready)
    with ready.reading() as c:
        row = c.execute(weather.weather_block.select().limit(1)).one()
    block = weather.Block(**row._mapping)
    assert blocks.unpack(block) is not None
    assert blocks.unpack(weather.Block("0" * 64, *(list(row)[1:]))) is None


def test_a_row_altered_behind_the_store_changes_the_digest(ready: Store) -> None:
    before = read(ready)
    with ready.writing() as c:
        table = weather.station_day
        c.execute(update(table).where(table.c.station == "a", table.c.day == LAST).values(rain=9.0))
    assert read(ready).digest != before.digest


def test_a_reader_who_joins_changes_nothing_and_a_new_place_only_the_future(ready: Store) -> None:
    before = read(ready)
    far = a_paddock("p2", place=place(LAT + 0.5, LON))
    with ready.writing() as c:
        network.save_paddocks(c, [far], LATER)
        network.save_postcodes(c, [a_postcode(code="9002", place=place(LAT, LON + 1))], LATER)
    assert read(ready).digest == before.digest
    assert len(read(ready, LATER).cells) == len(before.cells) + 14  # each with its six neighbours


def test_days_that_run_backwards_are_refused(ready: Store) -> None:
    with pytest.raises(ValueError, match="backwards"):
        cell_days(ready, DISTRICT, NOW, LAST, FIRST)


def test_spans_overlap_without_differing(ready: Store) -> None:
    whole, part = read(ready), cell_days(ready, DISTRICT, NOW, FIRST + timedelta(days=1), LAST - timedelta(days=1))
    assert part.rain.tobytes() == whole.rain[1:-1].tobytes()
    assert part.digest != whole.digest
