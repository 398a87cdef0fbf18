"""The network's files: districts, postcodes, holdings, paddocks, people, subscribers, weather stations.

A file is taken whole or not at all, and taking it again changes nothing. Whether a reader gets mail is
never decided here: a reader who paused or left stays so, whatever a list says.
"""

import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import date, datetime
from pathlib import Path
from typing import Any

from rules.records import Holding, Paddock, Person, Place, Postcode, Station, Subscriber
from service import rows, rulebook
from service.clock import Clock
from service.errors import BadInput
from service.intake import district_file, references
from service.intake.kinds import NETWORK, kind_of
from service.places import place
from service.rows import Row, nearest
from service.store import network, weather
from service.store.base import Store

ROLES = ("coordinator", "deputy", "officer", "adviser", "grower")
LANGUAGES = ("en",)  # the languages there are templates for
ACTION_GROUP = re.compile(r"(?:[1-9]|[12]\d|3\d)[A-F]?|UN")  # as the mode-of-action scheme for insecticides writes them
CODE = re.compile(r"[A-Za-z0-9][A-Za-z0-9 -]{0,15}")
LOWEST_M, HIGHEST_M = -430.0, 8850.0  # the shore of the Dead Sea, the top of Everest [M]

Crops = Mapping[str, str]  # every name of a crop, in lower case, and its id


def take_network(store: Store, path: Path, *, clock: Clock) -> dict[str, int]:
    """Take one file of the network; BadInput names each row, field and remedy, and nothing is kept then.

    Returns the numbers of `rows`, and of those `new`, `changed` and `same`.
    """
    kind = kind_of(path)
    if kind == "district":
        return _take_districts(store, path, clock.now())
    if kind not in NETWORK:
        raise BadInput(f"{path.name} holds {kind}, which are no part of the network")
    table = rows.read(path, NETWORK[kind].required, NETWORK[kind].optional)
    crops = crop_names()
    found = [
        (row, record) for row in table if not row.refusals and (record := _KINDS[kind].build(row, crops)) is not None
    ]
    key = _code_key if kind == "postcodes" else _id_key
    rows.once(table, key, "code" if kind == "postcodes" else "id")
    return _check_and_save(store, path, kind, table, found, clock.now())


def crop_names() -> Crops:
    """Every name that a crop goes by, in lower case, and its id."""
    crops = rulebook.load().crops.values()
    return {name.lower(): crop.id for crop in crops for name in (*crop.names, crop.name, crop.id)}


def _id_key(row: Row) -> object:
    return row.given("id")


def _code_key(row: Row) -> object:
    return row.given("district"), row.given("code")


def _check_and_save(
    store: Store, path: Path, kind: str, table: Sequence[Row], found: Sequence[tuple[Row, Any]], now: datetime
) -> dict[str, int]:
    """Check the references and write, in one transaction, so that what was checked is still so."""
    with store.writing() as c:
        known = references.load(c, now)
        before = getattr(known, kind)
        for row, record in found:
            references.check(row, record, known, kind)
        rows.finish(path, table)
        kept = [_keep_state(record, before.get(references.key_of(record))) for _, record in found]
        differing = [record for record in kept if before.get(references.key_of(record)) != record]
        _KINDS[kind].save(c, differing, now)
    new = sum(references.key_of(record) not in before for record in kept)
    return {"rows": len(table), "new": new, "changed": len(differing) - new, "same": len(kept) - len(differing)}


def _keep_state(record: Any, before: Any) -> Any:
    """A list of readers never brings back one who paused or left, nor lets an address that left be forgotten."""
    if not isinstance(record, Subscriber) or not before:
        return record
    return replace(record, state=before.state, email=before.email if before.state == "left" else record.email)


def _take_districts(store: Store, path: Path, now: datetime) -> dict[str, int]:
    records = district_file.read(path)
    with store.writing() as c:
        before = {district.id: district for district in network.districts(c, now)}
        differing = [record for record in records if before.get(record.id) != record]
        for record in differing:
            network.save_district(c, record, now)
    new = sum(record.id not in before for record in records)
    counts = {"rows": len(records), "new": new, "changed": len(differing) - new}
    return counts | {"same": len(records) - len(differing)}


# --- one row, one record; None where something in it was refused --------------------------------


def _postcode(row: Row, _crops: Crops) -> Postcode | None:
    values: dict[str, Any] = {
        "district": row.id("district", needed=True),
        "code": _code(row, "code"),
        "name": row.text("name", needed=True),
        "place": _place(row),
    }
    return None if row.refusals else Postcode(**values)


def _holding(row: Row, _crops: Crops) -> Holding | None:
    values: dict[str, Any] = _head(row) | {"registered_on": row.day("registered_on", needed=True)}
    return None if row.refusals else Holding(**values)


def _paddock(row: Row, crops: Crops) -> Paddock | None:
    values: dict[str, Any] = _head(row) | {
        "holding": row.id("holding", needed=True),
        "place": _place(row),
        "area_ha": row.number_in("area_ha", 0.01, 100_000),
        "crop": _crop(row, "crop", crops),
        "sown_on": row.day("sown_on"),
        "up_on": row.day("up_on"),
        "last_crop": _crop(row, "last_crop", crops),
        **{name: row.yes_no(name) for name in ("pasture_before", "capeweed_before", "seed_dressing", "flowering")},
        "dressing_group": _action_group(row),
        "grazed": _days(row, "grazed"),
        "row_spacing_m": row.number_in("row_spacing_m", 0.05, 3),
        "plants_per_m2": row.number_in("plants_per_m2", 0.1, 5000),
        "enter_leave": row.yes_no("enter_leave") or False,
    }
    if values["sown_on"] and values["up_on"] and values["up_on"] < values["sown_on"]:
        row.refuse("up_on", f"is before sown_on {values['sown_on']}; mend one of the two")
    return None if row.refusals else Paddock(**values)


def _person(row: Row, _crops: Crops) -> Person | None:
    values: dict[str, Any] = _head(row) | {"email": row.email("email"), "roles": _roles(row)}
    return None if row.refusals else Person(**values)


def _subscriber(row: Row, crops: Crops) -> Subscriber | None:
    values: dict[str, Any] = _head(row) | {
        "email": row.email("email", needed=True),
        "postcode": _code(row, "postcode"),
        "crops": tuple(dict.fromkeys(_known_crop(row, "crops", name, crops) for name in row.several("crops"))),
        "paddocks": row.several("paddocks"),
        "holding": row.id("holding"),
        "language": row.choice("language", LANGUAGES) or LANGUAGES[0],
        "consent": _consent(row),
        "person": row.id("person"),
    }
    return None if row.refusals else Subscriber(**values)


def _station(row: Row, _crops: Crops) -> Station | None:
    values: dict[str, Any] = _head(row) | {"place": _place(row), "attribution": row.text("attribution")}
    return None if row.refusals else Station(**values)


# --- cells -------------------------------------------------------------------------------------


def _head(row: Row) -> dict[str, Any]:
    """What every record but a postcode begins with."""
    return {
        "id": row.id("id", needed=True),
        "district": row.id("district", needed=True),
        "name": row.text("name", needed=True),
    }


def _place(row: Row) -> Place | None:
    latitude = row.number_in("latitude", -90, 90, needed=True)
    longitude = row.number_in("longitude", -180, 180, needed=True)
    height = row.number_in("elevation_m", LOWEST_M, HIGHEST_M)
    return None if latitude is None or longitude is None else place(latitude, longitude, None, height)


def _code(row: Row, name: str) -> str | None:
    value = row.text(name, needed=True)
    if value is None or CODE.fullmatch(value):
        return value
    row.refuse(name, "write a postcode of at most 16 letters, digits, spaces and hyphens")
    return None


def _crop(row: Row, name: str, crops: Crops) -> str | None:
    value = row.text(name)
    return None if value is None else _known_crop(row, name, value, crops)


def _known_crop(row: Row, name: str, value: str, crops: Crops) -> str | None:
    """The id of a crop by any of its names."""
    found = crops.get(value.lower())
    if found is None:
        known = ", ".join(sorted(set(crops.values())))
        row.refuse(name, f"{value} is no crop we know{nearest(value, list(crops))} (there is: {known})")
    return found


def _action_group(row: Row) -> str | None:
    value = row.text("dressing_group")
    if value is None:
        return None
    if not ACTION_GROUP.fullmatch(value):
        row.refuse("dressing_group", "write the mode-of-action group, such as 4A, and no product")
    elif row.given("seed_dressing").lower() != "yes":
        row.refuse("dressing_group", "is given without seed_dressing yes; mend one of the two")
    return value


def _days(row: Row, name: str) -> tuple[date, ...]:
    found = []
    for part in row.several(name):
        single = Row(row.number, {name: part})
        found.append(single.day(name))
        row.refusals += single.refusals
    return tuple(day for day in found if day is not None)


def _roles(row: Row) -> tuple[str, ...]:
    roles = tuple(role.lower() for role in row.several("roles"))
    if not roles:
        row.given("roles", needed=True)
    for role in roles:
        if role not in ROLES:
            row.refuse("roles", f"{role} is no role{nearest(role, ROLES)} (there is: {', '.join(ROLES)})")
    return roles


def _consent(row: Row) -> str | None:
    value = row.text("consent")
    if not row.given("consent"):
        row.refuse("consent", "is empty; say how and when this reader agreed to get the digest, or leave them out")
    return value


# --- kinds -------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Kind:
    build: Callable[[Row, Crops], Any]
    save: Callable[[Any, Sequence[Any], datetime], object]  # over an open connection


_KINDS = {
    "postcodes": _Kind(_postcode, network.save_postcodes),
    "holdings": _Kind(_holding, network.save_holdings),
    "paddocks": _Kind(_paddock, network.save_paddocks),
    "people": _Kind(_person, lambda c, records, now: network.save_people(c, records)),
    "subscribers": _Kind(_subscriber, lambda c, records, now: network.save_subscribers(c, records)),
    "stations": _Kind(_station, weather.save_stations),
}
