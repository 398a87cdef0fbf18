"""What the store already knows of the network, and whether a row fits it.

Ids are unique over all districts, so that a row of one district can't take over another's.
"""

from collections import defaultdict
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import date, datetime
from typing import Any, TypeVar

from rules.records import District, Holding, Paddock, Person, Place, Postcode, Station, Subscriber
from service.places import distance_km
from service.rows import Row, nearest
from service.store import network, weather

T = TypeVar("T")

FARTHEST_KM = 1000.0  # no district is that wide; a swapped or unsigned coordinate lies farther off


@dataclass(frozen=True, slots=True)
class Network:
    """Everything that is known, by id; postcodes by district and code."""

    districts: Mapping[str, District]
    postcodes: Mapping[str, Postcode]
    holdings: Mapping[str, Holding]
    paddocks: Mapping[str, Paddock]
    people: Mapping[str, Person]
    subscribers: Mapping[str, Subscriber]
    stations: Mapping[str, Station]
    readers_of: Mapping[str, Sequence[Subscriber]]  # by the paddock they have as their own
    left: Mapping[str, frozenset[str]]  # by address in lower case: the ids of readers who left


def load(c: Any, as_of: datetime) -> Network:
    """Read the network of all districts, as it is known at a moment, over an open connection."""
    districts = {district.id: district for district in network.districts(c, as_of)}

    def each(read: Callable[..., list[Any]], *options: Any) -> dict[str, Any]:
        return {key_of(record): record for district in districts for record in read(c, district, *options)}

    subscribers = each(network.subscribers, None)
    return Network(
        districts=districts,
        postcodes=each(network.postcodes, as_of),
        holdings=each(network.holdings, as_of, date.max),
        paddocks=each(network.paddocks, as_of),
        people=each(network.people),
        subscribers=subscribers,
        stations=each(weather.stations, as_of),
        readers_of=_grouped((id, reader) for reader in subscribers.values() for id in reader.paddocks),
        left={
            address: frozenset(ids)
            for address, ids in _grouped(
                (reader.email.casefold(), reader.id) for reader in subscribers.values() if reader.state == "left"
            ).items()
        },
    )


def _grouped(pairs: Iterable[tuple[str, T]]) -> dict[str, list[T]]:
    groups: dict[str, list[T]] = defaultdict(list)
    for key, value in pairs:
        groups[key].append(value)
    return dict(groups)


def key_of(record: Any) -> str:
    """What tells a record from the others of its kind."""
    return f"{record.district} {record.code}" if isinstance(record, Postcode) else str(record.id)


# --- checks: each refuses the row where a reference does not hold -------------------------------


def check(row: Row, record: Any, known: Network, kind: str) -> None:
    """Everything that a row of this kind refers to must be there, and in the row's own district."""
    if record.district not in known.districts:
        hint = nearest(record.district, sorted(known.districts))
        row.refuse("district", f"is no district we know{hint}; take the district file first")
        return
    before = getattr(known, kind).get(key_of(record))
    if before is not None and before.district != record.district:
        row.refuse("id", "is in use in another district; choose an id of its own")
    place = getattr(record, "place", None)
    if place is not None:
        _near(row, place, known.districts[record.district])
    if kind in _SPECIAL:
        _SPECIAL[kind](row, record, known)


def _near(row: Row, place: Place, district: District) -> None:
    if distance_km(place.latitude, place.longitude, district.latitude, district.longitude) > FARTHEST_KM:
        remedy = f"lies more than {FARTHEST_KM:g} km from the district; swapped with longitude, or a sign missing?"
        row.refuse("latitude", remedy)


def _paddock(row: Row, record: Paddock, known: Network) -> None:
    if not _there(row, "holding", record.holding, known.holdings, record.district, "holdings"):
        return
    others = [reader.id for reader in known.readers_of.get(record.id, ()) if reader.holding != record.holding]
    if others:
        row.refuse(
            "holding",
            f"readers of another holding have this paddock as their own ({', '.join(sorted(others))}); "
            "take a subscribers file without it first",
        )


def _subscriber(row: Row, record: Subscriber, known: Network) -> None:
    if f"{record.district} {record.postcode}" not in known.postcodes:
        row.refuse("postcode", "is no postcode of this district; take the postcodes file first")
    _there(row, "holding", record.holding, known.holdings, record.district, "holdings")
    _there(row, "person", record.person, known.people, record.district, "people")
    for id in record.paddocks:
        paddock = known.paddocks.get(id)
        if paddock is None:
            row.refuse("paddocks", f"{id} is no paddock we know; take the paddocks file first")
        elif record.holding is None or paddock.holding != record.holding:
            row.refuse("paddocks", f"{id} does not belong to this reader's holding; mend one of the two")
    _not_left(row, record, known)


def _not_left(row: Row, record: Subscriber, known: Network) -> None:
    """An address that asked to be left alone does not come back under another id."""
    if known.left.get(record.email.casefold(), frozenset()) - {record.id}:
        row.refuse("email", "has left the digest, and only its owner can come back; take this row out")


def _there(row: Row, name: str, id: str | None, known: Mapping[str, Any], district: str, file: str) -> bool:
    """Whether a reference, if there is one, leads to a record of the same district."""
    if id is None or (id in known and known[id].district == district):
        return True
    row.refuse(name, f"is not known in this district; take the {file} file first")
    return False


_SPECIAL: Mapping[str, Callable[[Row, Any, Network], None]] = {"paddocks": _paddock, "subscribers": _subscriber}
