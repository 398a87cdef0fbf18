"""Small invented records for tests: give only what the test is about. All places lie in open ocean."""

from datetime import UTC, date, datetime
from typing import Any

from rules.digests import digest
from rules.records import District, Holding, Observation, Paddock, Person, Postcode, Subscriber, Why
from service.places import place

LAT, LON = -46.0, 100.0
NOW = datetime(2026, 5, 12, 2, 0, tzinfo=UTC)
FOUNDED = datetime(2026, 1, 5, tzinfo=UTC)  # when a test's network is taken in, before the season opens
TODAY = date(2026, 5, 12)


def a_district(**changes: Any) -> District:
    """A district in the southern Indian Ocean."""
    values: dict[str, Any] = {
        "id": "north",
        "name": "North Bank",
        "zone": "Australia/Adelaide",
        "hotline": "0000 000 000",
        "hotline_name": "the invented plant health line",
        "temperature_type": "south-eastern",
        "season_opens": "02-15",
        "latitude": LAT,
        "longitude": LON,
        "coordinator": "ivy",
    }
    return District(**(values | changes))


def a_postcode(**changes: Any) -> Postcode:
    return Postcode(
        **({"district": "north", "code": "9001", "name": "Kelp Landing", "place": place(LAT, LON)} | changes)
    )


def a_holding(id: str = "h1", **changes: Any) -> Holding:
    values: dict[str, Any] = {"district": "north", "name": f"Holding {id}", "registered_on": date(2020, 1, 1)}
    return Holding(id=id, **(values | changes))


def a_paddock(id: str = "p1", **changes: Any) -> Paddock:
    values: dict[str, Any] = {
        "holding": "h1",
        "district": "north",
        "name": f"Paddock {id}",
        "place": place(LAT, LON, elevation_m=10.0),
    }
    return Paddock(id=id, **(values | changes))


def a_person(id: str = "ivy", **changes: Any) -> Person:
    values: dict[str, Any] = {
        "district": "north",
        "name": id.title(),
        "email": f"{id}@example.org",
        "roles": ("officer",),
    }
    return Person(id=id, **(values | changes))


def a_subscriber(id: str = "s1", **changes: Any) -> Subscriber:
    values: dict[str, Any] = {
        "district": "north",
        "email": f"{id}@example.org",
        "name": f"Reader {id}",
        "postcode": "9001",
        "crops": ("canola",),
        "consent": "signed the paper list on 2026-01-10",
    }
    return Subscriber(id=id, **(values | changes))


def an_observation(key: str = "csv:1", **changes: Any) -> Observation:
    values: dict[str, Any] = {
        "version": 1,
        "district": "north",
        "pest": "redlegged_earth_mite",
        "present": True,
        "day": TODAY,
        "place": place(LAT, LON),
        "reporter": "ivy",
        "why": Why.ROUTINE,
        "arrived_at": NOW,
        "knowable_from": NOW,
    }
    values |= changes
    return Observation(key=key, digest=digest(values), **values)
