"""What a row of observations may refer to: the network as it is known, the rule book's names, and now."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import date, datetime

from rules.book import Book
from rules.records import District, Paddock, Postcode
from service.clock import local_day
from service.errors import NotFound
from service.store import network
from service.store.base import Store


@dataclass(frozen=True, slots=True)
class Names:
    """Every name that the rule book knows a pest or crop by, in lower case, and what it is called here."""

    pests: Mapping[str, str]
    crops: Mapping[str, str]
    cereals: frozenset[str]  # crops whose stages may be given in Zadoks codes

    @classmethod
    def of(cls, book: Book) -> "Names":
        pests, crops = {}, {}
        for pest in book.pests.values():
            for name in (pest.id, pest.name, pest.plural, pest.eppo, *pest.scientific_names, *pest.aliases):
                pests[(name or pest.id).lower()] = pest.id
        for crop in book.crops.values():
            for name in (crop.id, crop.name, *crop.names):
                crops[name.lower()] = crop.id
        cereals = frozenset(crop.id for crop in book.crops.values() if crop.scale.lower() == "zadoks")
        return cls(pests, crops, cereals)


@dataclass(frozen=True, slots=True)
class Frame:
    """The world that rows are checked against. Where `districts` is empty, no reference is checked."""

    names: Names
    now: datetime
    districts: Mapping[str, District] = field(default_factory=dict)
    postcodes: Mapping[str, Mapping[str, Postcode]] = field(default_factory=dict)  # code → district → postcode
    paddocks: Mapping[str, Paddock] = field(default_factory=dict)
    people: frozenset[str] = frozenset()
    default_district: str | None = None

    def today(self, district: str) -> date:
        """The date on the district's wall calendars."""
        return local_day(self.now, self.districts[district].zone)


def frame_of(store: Store, names: Names, now: datetime, district: str | None = None) -> Frame:
    """The network of a store as it is known now. The only district there is needs no naming."""
    with store.reading() as c:
        districts = {each.id: each for each in network.districts(c, now)}
        if not districts:
            raise NotFound("there is no district yet; take a district file first")
        if district is not None:
            network.get_district(c, district, now)  # says which there are, if it is none of them
        postcodes: dict[str, dict[str, Postcode]] = {}
        paddocks: dict[str, Paddock] = {}
        people: set[str] = set()
        for id in districts:
            for postcode in network.postcodes(c, id, now):
                postcodes.setdefault(postcode.code, {})[id] = postcode
            paddocks |= {paddock.id: paddock for paddock in network.paddocks(c, id, now)}
            people |= {person.id for person in network.people(c, id)}
    only = next(iter(districts)) if len(districts) == 1 else None
    return Frame(names, now, districts, postcodes, paddocks, frozenset(people), district or only)
