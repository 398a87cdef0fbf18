"""A small invented district in a store: enough holdings to hide each other, weather that meets the hatch rule.

Everything lies in open ocean. Six holdings have a paddock each within a kilometre or two; one of them is counted
well above the number that matters; the weather is wet and cool from 12 April.
"""

from datetime import UTC, date, datetime, timedelta

from rules.records import Observation, Paddock, Station, StationDay, Subscriber, Why
from service.places import place
from service.store import network, observations
from service.store import weather as weather_store
from service.store.base import Store
from service.store.observation_digest import content_digest
from tests.builders import FOUNDED, LAT, LON, a_district, a_holding, a_paddock, a_person, a_postcode, a_subscriber

CUT_OFF = datetime(2026, 5, 12, 2, 30, tzinfo=UTC)  # Tuesday noon in the district
SOWN = date(2026, 4, 20)
ARRIVED = datetime(2026, 5, 11, 6, 0, tzinfo=UTC)


def paddocks() -> list[Paddock]:
    return [
        a_paddock(
            f"p{i}",
            holding=f"h{i}",
            name=f"Kittiwake {i}",
            place=place(LAT + 0.004 * i, LON + 0.003 * i, elevation_m=10.0),
            crop="canola",
            sown_on=SOWN,
            up_on=date(2026, 5, 2),
        )
        for i in range(1, 7)
    ]


def readers() -> list[Subscriber]:
    """A reader for each holding, and one who gave only a postcode."""
    owners = [
        a_subscriber(f"s{i}", holding=f"h{i}", paddocks=(f"p{i}",), person=f"grower{i}", name=f"Reader {i}")
        for i in range(1, 7)
    ]
    return [*owners, a_subscriber("s7")]


def station_days(since: date = date(2026, 2, 15), until: date = date(2026, 5, 11)) -> list[StationDay]:
    """Warm and dry until 11 April; 9 mm on the 12th; then cool."""
    days = []
    for i in range((until - since).days + 1):
        day = since + timedelta(days=i)
        cool = day >= date(2026, 4, 12)
        rain = 9.0 if day == date(2026, 4, 12) else 0.0
        tmin, tmax = (8.0, 17.0) if cool else (14.0, 27.0)
        at = datetime(day.year, day.month, day.day, tzinfo=UTC) + timedelta(days=1)
        for station in ("buoy1", "buoy2"):
            mark = weather_store.content_digest(StationDay(station, day, 1, tmin, tmax, rain, at, at, ""))
            days.append(StationDay(station, day, 1, tmin, tmax, rain, at, at, mark))
    return days


def look(key: str, paddock: Paddock, reporter: str, *, found: bool, counts: tuple[float, ...] = ()) -> Observation:
    """A look for redlegged earth mites in canola at one true leaf."""
    values = {
        "key": key,
        "version": 1,
        "district": "north",
        "pest": "redlegged_earth_mite",
        "present": found,
        "day": date(2026, 5, 10),
        "place": paddock.place,
        "reporter": reporter,
        "why": Why.ROUTINE,
        "arrived_at": ARRIVED,
        "knowable_from": ARRIVED,
        "paddock": paddock.id,
        "crop": "canola",
        "stage": 11,
        "stage_scale": "BBCH",
        "count": sum(counts) or None,
        "unit": "per_plant" if counts else None,
        "units_sampled": 20 * len(counts) or None,
        "spot_counts": counts,
        "units_per_spot": 20 if counts else None,
        "confidence": "sure",
    }
    unnamed = Observation(**values, digest="")  # type: ignore[arg-type]
    return Observation(**values, digest=content_digest(unnamed))  # type: ignore[arg-type]


def looks() -> list[Observation]:
    fields = paddocks()
    many = tuple(300.0 + 10 * i for i in range(8))  # 15 to 18 mites a plant, over 20 plants a spot
    found = [look("csv:1", fields[0], "grower1", found=True, counts=many)]
    return found + [look(f"csv:{i}", fields[i - 1], f"grower{i}", found=i == 2) for i in range(2, 7)]


def fill(store: Store) -> None:
    """The whole district, all of it knowable at `CUT_OFF`."""
    people = [a_person("ivy", name="Ivy Tern", roles=("coordinator",))]
    people += [a_person(f"grower{i}", name=f"Wren Gannet{i}", roles=("grower",)) for i in range(1, 7)]
    with store.writing() as c:
        network.save_district(c, a_district(), FOUNDED)
        network.save_postcodes(c, [a_postcode()], FOUNDED)
        network.save_people(c, people)
        network.save_holdings(c, [a_holding(f"h{i}", name=f"Petrel Farm {i}") for i in range(1, 7)], FOUNDED)
        network.save_paddocks(c, paddocks(), datetime(2026, 5, 3, tzinfo=UTC))
        network.save_subscribers(c, readers())
        stations = [
            Station("buoy1", "north", "Buoy one", place(LAT + 0.1, LON, elevation_m=5.0), "the invented buoys"),
            Station("buoy2", "north", "Buoy two", place(LAT - 0.1, LON + 0.1, elevation_m=5.0), "the invented buoys"),
        ]
        weather_store.save_stations(c, stations, FOUNDED)
        weather_store.add_station_days(c, station_days())
        observations.add(c, looks())
