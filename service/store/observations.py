"""Observations: one row for each version of each report, added and never changed.

The key (source and record id) names a report, the version its wording at a time. A read names the moment
it wants them as known at. References to people, paddocks and pests are checked on the way in and carry no
foreign keys: a row outlives what it was reported about.
"""

from collections.abc import Sequence
from dataclasses import asdict
from datetime import date, datetime
from typing import Any

from sqlalchemy import (
    BigInteger,
    Boolean,
    Column,
    Connection,
    Date,
    Float,
    Index,
    Integer,
    LargeBinary,
    Row,
    String,
    Table,
    insert,
    select,
)

from rules.records import Observation, Why
from service.store import versions
from service.store.base import UtcTime, metadata
from service.store.network import place_of
from service.store.observation_digest import content_digest

__all__ = ["add", "content_digest", "get", "observation", "read"]

observation = Table(
    "observation",
    metadata,
    Column("key", String, primary_key=True),
    Column("version", Integer, primary_key=True, autoincrement=False),
    Column("district", String, nullable=False),
    Column("pest", String, nullable=False),
    Column("present", Boolean, nullable=False),
    Column("day", Date, nullable=False),
    Column("latitude", Float(53), nullable=False),
    Column("longitude", Float(53), nullable=False),
    Column("cell", BigInteger, nullable=False),
    Column("uncertainty_m", Float(53)),
    Column("elevation_m", Float(53)),
    Column("reporter", String, nullable=False),
    Column("why", String, nullable=False),
    Column("arrived_at", UtcTime, nullable=False),
    Column("knowable_from", UtcTime, nullable=False),
    Column("digest", LargeBinary, nullable=False),
    Column("paddock", String),
    Column("postcode", String),
    Column("crop", String),
    Column("stage", Integer),
    Column("stage_scale", String),
    Column("count", Float(53)),
    Column("unit", String),
    Column("units_sampled", Integer),
    Column("method", String),
    Column("damage", String),
    Column("plants_per_m2", Float(53)),
    Column("row_spacing_m", Float(53)),
    Column("confidence", String),
    Column("spot_counts", String),  # numbers separated by ";"
    Column("units_per_spot", Integer),
    Column("spot_at", String),  # words separated by ";"
    Column("trap", String),
    Column("lure", String),
    Column("nights", Integer),
    Column("serviced_on", Date),
    Column("beneficials", String),
    Column("treated_group", String),
    Column("treated_on", Date),
    Column("note", String),
    Column("history", Boolean, nullable=False),
    Column("arrival_assumed", Boolean, nullable=False),
    Index("ix_observation_district_day", "district", "day"),
)


def add(c: Connection, records: Sequence[Observation]) -> int:
    """Add versions of reports as they are; returns how many."""
    if records:
        c.execute(insert(observation), [_row_of(record) for record in records])
    return len(records)


def read(
    c: Connection,
    district: str,
    as_of: datetime,
    *,
    pest: str | None = None,
    first_day: date | None = None,
    last_day: date | None = None,
) -> list[Observation]:
    """The newest version knowable at `as_of` of each report of a district, by key; days are inclusive."""
    query = versions.newest(observation, as_of).where(observation.c.district == district)
    if pest is not None:
        query = query.where(observation.c.pest == pest)
    if first_day is not None:
        query = query.where(observation.c.day >= first_day)
    if last_day is not None:
        query = query.where(observation.c.day <= last_day)
    found = [_record_of(row) for row in c.execute(query)]
    return sorted(found, key=lambda record: record.key)  # not in SQL: the stores sort texts differently


def get(c: Connection, key: str, version: int) -> Observation | None:
    """One version of one report."""
    query = select(observation).where(observation.c.key == key, observation.c.version == version)
    row = c.execute(query).one_or_none()
    return None if row is None else _record_of(row)


_SAME_IN_BOTH = [
    name
    for name in Observation.__dataclass_fields__
    if name not in ("place", "why", "digest", "spot_counts", "spot_at")
]


def _row_of(record: Observation) -> dict[str, Any]:
    values = {name: getattr(record, name) for name in _SAME_IN_BOTH} | asdict(record.place)
    return values | {
        "why": record.why.value,
        "digest": bytes.fromhex(record.digest),
        "spot_counts": ";".join(map(repr, map(float, record.spot_counts))) or None,
        "spot_at": ";".join(record.spot_at) or None,
    }


def _record_of(row: Row[Any]) -> Observation:
    values = {name: getattr(row, name) for name in _SAME_IN_BOTH if name != "count"}
    return Observation(
        place=place_of(row),
        why=Why(row.why),
        digest=row.digest.hex(),
        count=row._mapping["count"],  # a row is a tuple, and a tuple has a method of that name
        spot_counts=tuple(map(float, row.spot_counts.split(";"))) if row.spot_counts else (),
        spot_at=tuple(row.spot_at.split(";")) if row.spot_at else (),
        **values,
    )
