"""Districts, postcodes, holdings, paddocks, people, subscribers: the network that a group looks after.

Paddocks are versioned, because their crop and sowing feed rules: each take adds a row, none is changed,
and a read names the moment it wants them as known at.
"""

from collections.abc import Sequence
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
    Integer,
    Row,
    String,
    Table,
    and_,
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
    Subscriber,
)
from service.errors import NotFound
from service.store.base import UtcTime, metadata


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


district = Table(
    "district",
    metadata,
    Column("id", String, primary_key=True),
    Column("name", String, nullable=False),
    Column("record", JSON, nullable=False),  # the rest of the record as plain values
)

postcode = Table(
    "postcode",
    metadata,
    Column("district", ForeignKey("district.id"), primary_key=True),
    Column("code", String, primary_key=True),
    Column("name", String, nullable=False),
    *place_columns(),
)

holding = Table(
    "holding",
    metadata,
    Column("id", String, primary_key=True),
    Column("district", ForeignKey("district.id"), nullable=False, index=True),
    Column("name", String, nullable=False),
    Column("registered_on", Date, nullable=False),
)

paddock = Table(
    "paddock",
    metadata,
    Column("id", String, primary_key=True),
    Column("version", Integer, primary_key=True),
    Column("knowable_from", UtcTime, nullable=False),
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


# --- writing: each takes records and replaces by id, except paddocks, which gain a version -------


def save_district(c: Connection, record: District) -> None:
    values = {"name": record.name, "record": plain(record)}
    if not c.execute(update(district).where(district.c.id == record.id).values(values)).rowcount:
        c.execute(insert(district).values(id=record.id, **values))


def save(c: Connection, table: Table, rows: Sequence[dict[str, Any]]) -> int:
    """Insert rows or replace those whose primary key is known; returns how many are new."""
    keys = [column.name for column in table.primary_key]
    new = 0
    for row in rows:
        same = and_(*(table.c[key] == row[key] for key in keys))
        if not c.execute(update(table).where(same).values(row)).rowcount:
            c.execute(insert(table).values(row))
            new += 1
    return new


def flat(record: Postcode | Holding | Person | Subscriber | Paddock) -> dict[str, Any]:
    """A record as one row: its place spread into columns, tuples as lists."""
    row = {name: list(v) if isinstance(v, tuple) else v for name, v in asdict(record).items()}
    row.update(row.pop("place", {}))
    return row


def save_postcodes(c: Connection, records: Sequence[Postcode]) -> int:
    return save(c, postcode, [flat(record) for record in records])


def save_holdings(c: Connection, records: Sequence[Holding]) -> int:
    return save(c, holding, [flat(record) for record in records])


def save_people(c: Connection, records: Sequence[Person]) -> int:
    return save(c, person, [flat(record) for record in records])


def save_subscribers(c: Connection, records: Sequence[Subscriber]) -> int:
    return save(c, subscriber, [flat(record) for record in records])


def save_paddocks(c: Connection, records: Sequence[Paddock], knowable_from: datetime) -> int:
    """Add a version of each paddock that differs from what is known; returns how many were added."""
    known = {row.id: row for row in c.execute(_newest_paddocks())}
    added = []
    for record in records:
        before = known.get(record.id)
        if before is not None and paddock_of(before) == record:
            continue
        row = flat(record) | {"knowable_from": knowable_from, "version": before.version + 1 if before else 1}
        row["grazed"] = plain(record.grazed)
        added.append(row)
    if added:
        c.execute(insert(paddock), added)
    return len(added)


def set_subscriber_state(c: Connection, id: str, state: str) -> bool:
    """Change whether a reader gets mail; False if that was so already or there is no such reader."""
    changed = update(subscriber).where(subscriber.c.id == id, subscriber.c.state != state).values(state=state)
    return bool(c.execute(changed).rowcount)


# --- reading -----------------------------------------------------------------------------------


def districts(c: Connection) -> list[District]:
    return [_district_of(row.record) for row in c.execute(select(district).order_by(district.c.id))]


def get_district(c: Connection, id: str) -> District:
    """One district; NotFound says which there are."""
    row = c.execute(select(district).where(district.c.id == id)).one_or_none()
    if row is None:
        known = ", ".join(found.id for found in districts(c)) or "none yet; take a district file first"
        raise NotFound(f"there is no district {id!r} (there is: {known})")
    return _district_of(row.record)


def postcodes(c: Connection, district_id: str) -> list[Postcode]:
    rows = c.execute(select(postcode).where(postcode.c.district == district_id).order_by(postcode.c.code))
    return [Postcode(row.district, row.code, row.name, place_of(row)) for row in rows]


def holdings(c: Connection, district_id: str, registered_by: date) -> list[Holding]:
    """Holdings registered on or before a day."""
    rows = c.execute(
        select(holding)
        .where(holding.c.district == district_id, holding.c.registered_on <= registered_by)
        .order_by(holding.c.id)
    )
    return [Holding(row.id, row.district, row.name, row.registered_on) for row in rows]


def paddocks(c: Connection, district_id: str, as_of: datetime) -> list[Paddock]:
    """Paddocks as they were known at a moment, by id."""
    newest = _newest_paddocks(as_of).where(paddock.c.district == district_id).order_by(paddock.c.id)
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


def _newest_paddocks(as_of: datetime | None = None) -> Any:
    versions = select(paddock.c.id, func.max(paddock.c.version).label("version")).group_by(paddock.c.id)
    if as_of is not None:
        versions = versions.where(paddock.c.knowable_from <= as_of)
    newest = versions.subquery()
    return select(paddock).join(newest, and_(paddock.c.id == newest.c.id, paddock.c.version == newest.c.version))


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
