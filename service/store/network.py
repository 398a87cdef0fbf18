"""Districts, postcodes, holdings, paddocks, people, subscribers: the network that a group looks after.

Districts, postcodes, holdings and paddocks feed rules, so they are versioned: each take adds rows, none is
changed, and a read names the moment it wants them as known at. People and readers are as they are now.
"""

from collections.abc import Iterable, Sequence
from dataclasses import asdict
from datetime import date, datetime
from typing import Any

from sqlalchemy import (
    JSON,
    BigInteger,
    Boolean,
    CheckConstraint,
    Column,
    Connection,
    Date,
    Float,
    ForeignKey,
    Row,
    String,
    Table,
    func,
    insert,
    select,
    update,
)

from rules.digests import plain
from rules.records import (
    District,
    Holding,
    Paddock,
    Person,
    Place,
    Postcode,
    Reportable,
    Station,
    Subscriber,
)
from service.errors import NotFound
from service.store import versions
from service.store.base import metadata


def place_columns() -> list[Column[Any]]:
    """Columns of a place, the same in every table that has one."""
    return [
        Column("latitude", Float(53), nullable=False),
        Column("longitude", Float(53), nullable=False),
        Column("cell", BigInteger, nullable=False, index=True),
        Column("uncertainty_m", Float(53)),
        Column("elevation_m", Float(53)),
    ]


def place_of(row: Row[Any]) -> Place:
    """The place that a row holds."""
    return Place(row.latitude, row.longitude, row.cell, row.uncertainty_m, row.elevation_m)


district = Table("district", metadata, Column("id", String, primary_key=True))  # what other rows refer to

district_version = Table(
    "district_version",
    metadata,
    Column("id", ForeignKey("district.id"), primary_key=True),
    *versions.columns(),
    Column("record", JSON, nullable=False),  # the record as plain values
)

postcode = Table(
    "postcode",
    metadata,
    Column("district", ForeignKey("district.id"), primary_key=True),
    Column("code", String, primary_key=True),
    *versions.columns(),
    Column("name", String, nullable=False),
    *place_columns(),
)

holding = Table("holding", metadata, Column("id", String, primary_key=True))  # what other rows refer to

holding_version = Table(
    "holding_version",
    metadata,
    Column("id", ForeignKey("holding.id"), primary_key=True),
    *versions.columns(),
    Column("district", ForeignKey("district.id"), nullable=False, index=True),
    Column("name", String, nullable=False),
    Column("registered_on", Date, nullable=False),
)

paddock = Table(
    "paddock",
    metadata,
    Column("id", String, primary_key=True),
    *versions.columns(),
    Column("holding", ForeignKey("holding.id"), nullable=False, index=True),
    Column("district", ForeignKey("district.id"), nullable=False, index=True),
    Column("name", String, nullable=False),
    *place_columns(),
    Column("area_ha", Float(53)),
    Column("crop", String),
    Column("sown_on", Date),
    Column("up_on", Date),
    Column("last_crop", String),
    Column("pasture_before", Boolean),
    Column("capeweed_before", Boolean),
    Column("seed_dressing", Boolean),
    Column("dressing_group", String),
    Column("grazed", JSON, nullable=False),
    Column("flowering", Boolean),
    Column("row_spacing_m", Float(53)),
    Column("plants_per_m2", Float(53)),
    Column("enter_leave", Boolean, nullable=False),
)

person = Table(
    "person",
    metadata,
    Column("id", String, primary_key=True),
    Column("district", ForeignKey("district.id"), nullable=False, index=True),
    Column("name", String, nullable=False),
    Column("email", String),
    Column("roles", JSON, nullable=False),
)

subscriber = Table(
    "subscriber",
    metadata,
    Column("id", String, primary_key=True),
    Column("district", ForeignKey("district.id"), nullable=False, index=True),
    Column("email", String, nullable=False),
    Column("name", String, nullable=False),
    Column("postcode", String, nullable=False),
    Column("crops", JSON, nullable=False),
    Column("paddocks", JSON, nullable=False),
    Column("holding", ForeignKey("holding.id")),
    Column("language", String, nullable=False),
    Column("state", String, nullable=False),
    Column("consent", String),
    Column("person", ForeignKey("person.id")),
    CheckConstraint("state IN ('confirmed', 'paused', 'left')", name="state"),
)


# --- writing: what is versioned gains a version where it differs, people and readers are replaced by id ----


def save_district(c: Connection, record: District, knowable_from: datetime) -> int:
    """Add a version if the district differs from what is known; returns how many were added."""
    versions.add_ids(c, district, [record.id])
    return versions.add(c, district_version, [{"id": record.id, "record": plain(record)}], knowable_from)


def save_postcodes(c: Connection, records: Sequence[Postcode], knowable_from: datetime) -> int:
    """Add a version of each postcode that differs from what is known; returns how many were added."""
    return versions.add(c, postcode, map(flat, records), knowable_from)


def save_holdings(c: Connection, records: Sequence[Holding], knowable_from: datetime) -> int:
    """Add a version of each holding that differs from what is known; returns how many were added."""
    versions.add_ids(c, holding, (record.id for record in records))
    return versions.add(c, holding_version, map(flat, records), knowable_from)


def save_paddocks(c: Connection, records: Sequence[Paddock], knowable_from: datetime) -> int:
    """Add a version of each paddock that differs from what is known; returns how many were added."""
    rows = [flat(record) | {"grazed": plain(record.grazed)} for record in records]
    return versions.add(c, paddock, rows, knowable_from)


def save_people(c: Connection, records: Sequence[Person]) -> int:
    return _replace(c, person, map(flat, records))


def save_subscribers(c: Connection, records: Sequence[Subscriber]) -> int:
    return _replace(c, subscriber, map(flat, records))


def flat(record: Postcode | Holding | Paddock | Station | Person | Subscriber) -> dict[str, Any]:
    """A record as one row: its place spread into columns, tuples as lists."""
    row = {name: list(v) if isinstance(v, tuple) else v for name, v in asdict(record).items()}
    row.update(row.pop("place", {}))
    return row


def _replace(c: Connection, table: Table, rows: Iterable[dict[str, Any]]) -> int:
    """Insert rows or replace those whose id is known; returns how many are new."""
    new = 0
    for row in rows:
        if not c.execute(update(table).where(table.c.id == row["id"]).values(row)).rowcount:
            c.execute(insert(table).values(row))
            new += 1
    return new


def set_subscriber_state(c: Connection, id: str, state: str) -> bool:
    """Change whether a reader gets mail; False if that was so already or there is no such reader."""
    changed = update(subscriber).where(subscriber.c.id == id, subscriber.c.state != state).values(state=state)
    return bool(c.execute(changed).rowcount)


def leave(c: Connection, id: str) -> list[str]:
    """Stop all mail to a reader's address, under whatever ids it is known; returns those that got mail before."""
    address = select(func.lower(subscriber.c.email)).where(subscriber.c.id == id).scalar_subquery()
    theirs = select(subscriber.c.id).where(func.lower(subscriber.c.email) == address).order_by(subscriber.c.id)
    return [each for each in c.scalars(theirs).all() if set_subscriber_state(c, each, "left")]


# --- reading -----------------------------------------------------------------------------------


def districts(c: Connection, as_of: datetime) -> list[District]:
    """Districts as they were known at a moment, by id."""
    newest = versions.newest(district_version, as_of).order_by(district_version.c.id)
    return [_district_of(row.record) for row in c.execute(newest)]


def get_district(c: Connection, id: str, as_of: datetime) -> District:
    """One district as it was known at a moment; NotFound says which there are, or since when it is known."""
    newest = versions.newest(district_version, as_of).where(district_version.c.id == id)
    row = c.execute(newest).one_or_none()
    if row is not None:
        return _district_of(row.record)
    since = c.execute(select(func.min(district_version.c.knowable_from)).where(district_version.c.id == id)).scalar()
    if since is not None:
        raise NotFound(f"district {id!r} is known since {since:%Y-%m-%d %H:%M} UTC; nothing can be said of it before")
    known = ", ".join(found.id for found in districts(c, as_of)) or "none yet; take a district file first"
    raise NotFound(f"there is no district {id!r} (there is: {known})")


def postcodes(c: Connection, district_id: str, as_of: datetime) -> list[Postcode]:
    """Postcodes as they were known at a moment, by code."""
    newest = versions.newest(postcode, as_of).where(postcode.c.district == district_id).order_by(postcode.c.code)
    return [Postcode(row.district, row.code, row.name, place_of(row)) for row in c.execute(newest)]


def holdings(c: Connection, district_id: str, as_of: datetime, registered_by: date) -> list[Holding]:
    """Holdings registered on or before a day, as they were known at a moment, by id."""
    table = holding_version.c
    newest = versions.newest(holding_version, as_of).where(
        table.district == district_id, table.registered_on <= registered_by
    )
    rows = c.execute(newest.order_by(table.id))
    return [Holding(row.id, row.district, row.name, row.registered_on) for row in rows]


def paddocks(c: Connection, district_id: str, as_of: datetime) -> list[Paddock]:
    """Paddocks as they were known at a moment, by id."""
    newest = versions.newest(paddock, as_of).where(paddock.c.district == district_id).order_by(paddock.c.id)
    return [paddock_of(row) for row in c.execute(newest)]


def people(c: Connection, district_id: str) -> list[Person]:
    rows = c.execute(select(person).where(person.c.district == district_id).order_by(person.c.id))
    return [Person(row.id, row.district, row.name, row.email, tuple(row.roles)) for row in rows]


def subscribers(c: Connection, district_id: str, state: str | None = "confirmed") -> list[Subscriber]:
    """Readers of a district, by id; those in one state, or all."""
    query = select(subscriber).where(subscriber.c.district == district_id).order_by(subscriber.c.id)
    if state is not None:
        query = query.where(subscriber.c.state == state)
    return [_subscriber_of(row) for row in c.execute(query)]


def get_subscriber(c: Connection, id: str) -> Subscriber | None:
    row = c.execute(select(subscriber).where(subscriber.c.id == id)).one_or_none()
    return None if row is None else _subscriber_of(row)


def paddock_of(row: Row[Any]) -> Paddock:
    """The record of a paddock's row."""
    values = {name: getattr(row, name) for name in _PADDOCK_FIELDS}
    values["grazed"] = tuple(date.fromisoformat(day) for day in row.grazed)
    return Paddock(place=place_of(row), **values)


_PADDOCK_FIELDS = [name for name in Paddock.__dataclass_fields__ if name != "place"]


def _subscriber_of(row: Row[Any]) -> Subscriber:
    values = {name: getattr(row, name) for name in Subscriber.__dataclass_fields__}
    values |= {"crops": tuple(row.crops), "paddocks": tuple(row.paddocks)}
    return Subscriber(**values)


def _district_of(record: dict[str, Any]) -> District:
    listed = tuple(
        Reportable(entry["id"], tuple(entry["names"]), date.fromisoformat(entry["listed_on"]))
        for entry in record["reportables"]
    )
    return District(**(record | {"reportables": listed}))
