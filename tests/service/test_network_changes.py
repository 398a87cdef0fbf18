"""A network that changes after an edition is signed: its trail stays equal, and the next draft takes it up."""

from collections.abc import Callable
from dataclasses import replace
from datetime import date, datetime, timedelta
from pathlib import Path

import pytest
from sqlalchemy import Connection

from rules.records import Station
from service import pipeline
from service.clock import SetClock
from service.errors import NotFound
from service.places import place
from service.settings import Settings
from service.store import editions, network
from service.store import weather as weather_store
from service.store.base import Store
from tests import small_network
from tests.builders import FOUNDED, LAT, LON, a_district, a_holding, a_postcode
from tests.small_network import CUT_OFF

WEEK, NEXT_WEEK = "north-2026-W20", "north-2026-W21"
NEXT = CUT_OFF + timedelta(days=7)
CHANGED = NEXT + timedelta(hours=1)


def _postcode_moved(c: Connection) -> None:
    """The reader who gave only a postcode now stands some 55 km away from every look."""
    network.save_postcodes(c, [a_postcode(place=place(LAT + 0.5, LON))], CHANGED)


def _stations_moved(c: Connection) -> None:
    """Both buoys are now beyond the 150 km that weather is taken from."""
    weather_store.save_stations(c, [_buoy("buoy1", LAT + 2), _buoy("buoy2", LAT - 2)], CHANGED)


def _station_added_with_its_past(c: Connection) -> None:
    """A buoy amid the paddocks, with days that arrived somewhere long before: all of them cold and dry."""
    weather_store.save_stations(c, [_buoy("buoy3", LAT)], CHANGED)
    days = [each for each in small_network.station_days() if each.station == "buoy1"]
    weather_store.add_station_days(c, [replace(each, station="buoy3", tmin=0.0, tmax=1.0, rain=0.0) for each in days])


def _buoy(id: str, latitude: float) -> Station:
    return Station(id, "north", id, place(latitude, LON, elevation_m=5.0), "the invented buoys")


def _district_hides_more(c: Connection) -> None:
    """Six holdings can't hide each other among seven."""
    network.save_district(c, a_district(holdings_to_hide=7), CHANGED)


def _district_of_another_type(c: Connection) -> None:
    """The other published hatch constant: another day on which the weather had come."""
    network.save_district(c, a_district(temperature_type="western"), CHANGED)


def _holdings_registered_late(c: Connection) -> None:
    """Two of the six were not there when the season opened; four can't hide each other among five."""
    late = [a_holding(f"h{i}", name=f"Petrel Farm {i}", registered_on=date(2026, 3, 1)) for i in (5, 6)]
    network.save_holdings(c, late, CHANGED)


CHANGES = (
    _postcode_moved,
    _stations_moved,
    _station_added_with_its_past,
    _district_hides_more,
    _district_of_another_type,
    _holdings_registered_late,
)


@pytest.fixture
def full(store: Store) -> Store:
    small_network.fill(store)
    return store


@pytest.mark.parametrize("change", CHANGES)
def test_a_change_leaves_what_was_signed_and_matters_in_the_next_draft(
    full: Store, tmp_path: Path, change: Callable[[Connection], None]
) -> None:
    settings = Settings(data_dir=str(tmp_path), keys_file=str(tmp_path / "keys"))
    clock = SetClock(CUT_OFF)
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, WEEK, by="ivy", clock=clock)
    before = _drafted(full, NEXT)
    assert _drafted(full, CHANGED - timedelta(seconds=1)) == before, "an hour alone must change nothing"
    with full.writing() as c:
        change(c)
    assert _drafted(full, CHANGED - timedelta(seconds=1)) == before
    assert _drafted(full, CHANGED) != before, "the change must matter once it is known"
    for i in range(1, 8):
        found = pipeline.trail(full, WEEK, f"s{i}")
        assert found["equal"], (f"s{i}", found["compared"])


def _drafted(store: Store, at: datetime) -> tuple[object, ...]:
    """What is said at a moment: statements, slips, and what stands on every digest."""
    pipeline.draft(store, "north", clock=SetClock(at))
    with store.reading() as c:
        kept = [slip for piece in editions.slips(c, NEXT_WEEK) for slip, _ in piece]
        return editions.statements(c, NEXT_WEEK), kept, editions.get(c, NEXT_WEEK).head


def test_nothing_is_said_of_a_district_before_it_is_known(full: Store) -> None:
    with pytest.raises(NotFound, match="known since 2026-01-05 00:00 UTC"):
        pipeline.run_rules(full, "north", clock=SetClock(CUT_OFF), as_of=FOUNDED - timedelta(days=1))
