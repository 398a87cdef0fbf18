"""Who and what there is: two districts on the open ocean, their postcodes, holdings, paddocks, people, stations."""

from dataclasses import dataclass
from datetime import date
from functools import cached_property

from service.places import distance_km


@dataclass(frozen=True)
class District:
    """A district as it is invented; its rows are written by `build`."""

    id: str
    letter: str
    name: str
    zone: str
    latitude: float
    longitude: float
    temperature_type: str
    hotline: str
    hotline_name: str


SEXTANT = District(
    *("sextant", "A", "Sextant District", "Australia/Adelaide", -46.0, 92.0, "south-eastern"),
    *("0000 000 001", "the invented plant health line of Sextant District"),
)
LANTERN = District(
    *("lantern", "B", "Lantern District", "Australia/Perth", -44.0, 106.0, "western"),
    *("0000 000 002", "the invented plant health line of Lantern District"),
)
DISTRICTS = {district.id: district for district in (SEXTANT, LANTERN)}


@dataclass(frozen=True)
class Spot:
    """A point of the invented ground."""

    latitude: float
    longitude: float
    elevation_m: float

    def km_from(self, latitude: float, longitude: float) -> float:
        return float(distance_km(self.latitude, self.longitude, latitude, longitude))


@dataclass(frozen=True)
class Postcode:
    code: str
    district: str
    name: str
    spot: Spot


@dataclass(frozen=True)
class Holding:
    id: str
    district: str
    name: str
    postcode: str
    spot: Spot
    registered_on: date
    grower: str  # a person's id


@dataclass(frozen=True)
class Paddock:
    id: str
    holding: str
    district: str
    name: str
    spot: Spot
    area_ha: int
    enter_leave: bool


@dataclass(frozen=True)
class Person:
    id: str
    district: str
    name: str
    roles: str
    home: Spot


@dataclass(frozen=True)
class Station:
    id: str
    district: str
    name: str
    spot: Spot


@dataclass(frozen=True)
class Network:
    postcodes: tuple[Postcode, ...]
    holdings: tuple[Holding, ...]
    paddocks: tuple[Paddock, ...]
    people: tuple[Person, ...]
    stations: tuple[Station, ...]

    def paddocks_in(self, district: str) -> list[Paddock]:
        return self._by_district[district]

    def people_in(self, district: str, role: str) -> list[Person]:
        return [person for person in self.people if person.district == district and role in person.roles]

    def own(self, person: str) -> list[Paddock]:
        """The paddocks of a grower's holding."""
        return self._by_grower.get(person, [])

    def grower_of(self, paddock: Paddock) -> str:
        return self._growers[paddock.holding]

    @cached_property
    def _growers(self) -> dict[str, str]:
        return {holding.id: holding.grower for holding in self.holdings}

    @cached_property
    def _by_grower(self) -> dict[str, list[Paddock]]:
        found: dict[str, list[Paddock]] = {}
        for paddock in self.paddocks:
            found.setdefault(self.grower_of(paddock), []).append(paddock)
        return found

    @cached_property
    def _by_district(self) -> dict[str, list[Paddock]]:
        return {id: [paddock for paddock in self.paddocks if paddock.district == id] for id in DISTRICTS}


COORDINATORS = {"sextant": "a-coordinator", "lantern": "b-coordinator"}
