"""Gather all that was knowable of a district at one moment: the only input of signals and editions."""

from collections.abc import Mapping
from datetime import date, datetime

from rules import looks
from rules.book import Book
from rules.records import District, Known
from service import weather
from service.clock import local_day
from service.store import network, observations
from service.store import weather as weather_store
from service.store.base import Store


def know(store: Store, book: Book, district_id: str, as_of: datetime) -> Known:
    """What was knowable at `as_of`; reading it again later gives the same, whatever has arrived since."""
    with store.reading() as c:
        district = network.get_district(c, district_id, as_of)
        today = local_day(as_of, district.zone)
        since = season_from(district, today)
        rows = observations.read(c, district_id, as_of)
        paddocks = network.paddocks(c, district_id, as_of)
        holdings = network.holdings(c, district_id, as_of, since)
        postcodes = network.postcodes(c, district_id, as_of)
        people = network.people(c, district_id)
        stations = weather_store.stations(c, district_id, as_of)
        days = weather_store.station_days(c, district_id, as_of, since, today)
    return Known(
        district=district,
        as_of=as_of,
        today=today,
        season_from=since,
        observations=tuple(rows),
        looks=tuple(looks.derive(rows, spots_planned(book))),
        postcodes={each.code: each for each in postcodes},
        holdings={each.id: each for each in holdings},
        paddocks={each.id: each for each in paddocks},
        people={each.id: each for each in people},
        stations={each.id: each for each in stations},
        station_days=tuple(days),
        weather=weather.cell_days(store, district, as_of, since, today),
    )


def season_from(district: District, today: date) -> date:
    """The newest day on or before `today` on which the district's season opens."""
    month, day = (int(part) for part in district.season_opens.split("-"))
    opens = date(today.year, month, day)
    return opens if opens <= today else date(today.year - 1, month, day)


def spots_planned(book: Book) -> Mapping[str, int]:
    """How many spots a complete look takes, by pest."""
    return {pest.id: int(pest.spots.value) for pest in book.pests.values()}
