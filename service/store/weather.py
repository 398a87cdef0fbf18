"""Stations, their days, and the blocks of cell days worked out from them.

Stations and their days are only ever added to, and a read names the moment it wants them as known at:
values that differ from the newest known ones are a correction and become the next version. A correction is
never knowable before the version it corrects, so what was said on the strength of the older values can be
said again.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from datetime import date, datetime
from typing import Any

from sqlalchemy import (
    Boolean,
    Column,
    Connection,
    Date,
    Float,
    ForeignKey,
    Integer,
    LargeBinary,
    Row,
    Select,
    String,
    Table,
    and_,
    insert,
    select,
)
from sqlalchemy.dialects import postgresql, sqlite

from rules.digests import digest
from rules.records import Station, StationDay
from service.store import versions
from service.store.base import UtcTime, metadata
from service.store.network import flat, place_columns, place_of

station = Table("station", metadata, Column("id", String, primary_key=True))  # what other rows refer to

station_version = Table(
    "station_version",
    metadata,
    Column("id", ForeignKey("station.id"), primary_key=True),
    *versions.columns(),
    Column("district", ForeignKey("district.id"), nullable=False, index=True),
    Column("name", String, nullable=False),
    *place_columns(),
    Column("attribution", String),
)

station_day = Table(
    "station_day",
    metadata,
    Column("station", ForeignKey("station.id"), primary_key=True),
    Column("day", Date, primary_key=True),
    Column("version", Integer, primary_key=True),
    Column("tmin", Float(53)),
    Column("tmax", Float(53)),
    Column("rain", Float(53)),
    Column("arrived_at", UtcTime, nullable=False),
    Column("knowable_from", UtcTime, nullable=False),
    Column("arrival_assumed", Boolean, nullable=False),
    Column("digest", String(32), nullable=False),
)

weather_block = Table(
    "weather_block",
    metadata,
    Column("key", String(64), primary_key=True),  # the hash of everything it was worked out from
    Column("district", ForeignKey("district.id"), nullable=False, index=True),
    Column("month", Date, nullable=False),
    Column("variable", String, nullable=False),
    Column("content", String(64), nullable=False),  # the hash of `data`
    Column("data", LargeBinary, nullable=False),
)


@dataclass(frozen=True, slots=True)
class Block:
    """One variable of one district's month as it is kept: compressed, and named by its inputs."""

    key: str
    district: str
    month: date
    variable: str
    content: str
    data: bytes


# --- stations and their days -------------------------------------------------------------------


def save_stations(c: Connection, records: Sequence[Station], knowable_from: datetime) -> int:
    """Add a version of each station that differs from what is known; returns how many were added."""
    versions.add_ids(c, station, (record.id for record in records))
    return versions.add(c, station_version, map(flat, records), knowable_from)


def stations(c: Connection, district: str, as_of: datetime) -> list[Station]:
    """The stations of a district as they were known at a moment, by id."""
    rows = c.execute(_stations(district, as_of).order_by(station_version.c.id))
    return [Station(row.id, row.district, row.name, place_of(row), row.attribution) for row in rows]


def _stations(district: str, as_of: datetime) -> Select[Any]:
    return versions.newest(station_version, as_of).where(station_version.c.district == district)


def content_digest(record: StationDay) -> str:
    """The digest of what a station reported of a day, whenever it arrived."""
    values = (None if value is None else float(value) for value in (record.tmin, record.tmax, record.rain))
    return digest([record.station, record.day, *values])


def add_station_days(
    c: Connection, records: Sequence[StationDay], corrected_at: datetime | None = None
) -> dict[str, int]:
    """Add the days that are new or differ from the newest known; versions and digests are given here.

    A correction is knowable from `corrected_at`, whatever arrival its record states, and never before the
    version it corrects. Returns how many were `new`, `corrected` and `same`.
    """
    counts = {"new": 0, "corrected": 0, "same": 0}
    known = newest_known(c, records)
    added = []
    for record in records:
        before = known.get((record.station, record.day))
        mark = content_digest(record)
        if before is not None and before.digest == mark:
            counts["same"] += 1
            continue
        counts["new" if before is None else "corrected"] += 1
        added.append(_row_of(record, mark, before, corrected_at))
    if added:
        c.execute(insert(station_day), added)
    return counts


def newest_known(c: Connection, records: Iterable[StationDay]) -> dict[tuple[str, date], StationDay]:
    """The newest versions of the days that these records are about, whoever may know them yet."""
    spans: dict[str, tuple[date, date]] = {}
    for record in records:
        first, last = spans.get(record.station, (record.day, record.day))
        spans[record.station] = (min(first, record.day), max(last, record.day))
    known: dict[tuple[str, date], StationDay] = {}
    for name, (first, last) in spans.items():
        of_station = and_(station_day.c.station == name, station_day.c.day.between(first, last))
        for row in c.execute(select(station_day).where(of_station).order_by(station_day.c.day, station_day.c.version)):
            known[(name, row.day)] = _day_of(row)
    return known


def station_days(c: Connection, district: str, as_of: datetime, first_day: date, last_day: date) -> list[StationDay]:
    """The district's station days as they were known at a moment, by station and day."""
    of_district = _stations(district, as_of).with_only_columns(station_version.c.id)
    query = versions.newest(station_day, as_of).where(
        station_day.c.station.in_(of_district), station_day.c.day.between(first_day, last_day)
    )
    return [_day_of(row) for row in c.execute(query.order_by(station_day.c.station, station_day.c.day))]


def get_station_day(c: Connection, station_id: str, day: date, version: int) -> StationDay | None:
    """One version of one day, as it stands in the store now."""
    which = and_(station_day.c.station == station_id, station_day.c.day == day, station_day.c.version == version)
    row = c.execute(select(station_day).where(which)).one_or_none()
    return None if row is None else _day_of(row)


def _row_of(record: StationDay, mark: str, before: StationDay | None, corrected_at: datetime | None) -> dict[str, Any]:
    row = {name: getattr(record, name) for name in StationDay.__dataclass_fields__}
    row |= {"digest": mark, "version": 1}
    if before is not None:
        row["version"] = before.version + 1
        row["knowable_from"] = max(corrected_at or record.knowable_from, before.knowable_from)
    return row


def _day_of(row: Row[Any]) -> StationDay:
    return StationDay(**{name: getattr(row, name) for name in StationDay.__dataclass_fields__})


# --- blocks ------------------------------------------------------------------------------------


def blocks(c: Connection, keys: Sequence[str]) -> dict[str, Block]:
    """The stored blocks among these keys, as they stand; who reads them checks their content's hash."""
    rows = c.execute(select(weather_block).where(weather_block.c.key.in_(keys)))
    return {row.key: Block(**row._mapping) for row in rows}


def save_blocks(c: Connection, records: Sequence[Block]) -> None:
    """Keep blocks; one that is there already is replaced, since only an altered one is worked out again."""
    dialect = postgresql if c.dialect.name == "postgresql" else sqlite
    added = dialect.insert(weather_block)
    replaced = {name: added.excluded[name] for name in ("content", "data")}
    values = [{name: getattr(record, name) for name in Block.__dataclass_fields__} for record in records]
    c.execute(added.on_conflict_do_update(index_elements=["key"], set_=replaced), values)
