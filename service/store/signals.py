"""Signals as they were worked out: kept by run, never changed."""

from collections.abc import Sequence
from datetime import datetime
from typing import Any

from sqlalchemy import JSON, Column, Connection, Date, ForeignKey, Integer, Row, String, Table, insert, select

from rules.digests import plain
from rules.records import Ask, Evidence, Signal
from service.store.base import UtcTime, metadata

signal = Table(
    "signal",
    metadata,
    Column("district", ForeignKey("district.id"), primary_key=True),
    Column("as_of", UtcTime, primary_key=True),
    Column("id", String, primary_key=True),
    Column("place_in_run", Integer, nullable=False),
    Column("kind", String, nullable=False),
    Column("rule", String, nullable=False),
    Column("rule_hash", String, nullable=False),
    Column("pest", String, nullable=False),
    Column("ask", String, nullable=False),
    Column("cells", JSON, nullable=False),
    Column("paddock", String),
    Column("first_day", Date, nullable=False),
    Column("last_day", Date, nullable=False),
    Column("figures", JSON, nullable=False),
    Column("evidence", JSON, nullable=False),
)


def save(c: Connection, signals: Sequence[Signal]) -> int:
    """Keep the signals of a run; those kept already stay as they are. Returns how many were new."""
    known = {key for run in {(s.district, s.as_of) for s in signals} for key in _ids(c, *run)}
    rows = [
        _row(each) | {"place_in_run": place}
        for place, each in enumerate(signals)
        if (each.district, each.as_of, each.id) not in known
    ]
    if rows:
        c.execute(insert(signal), rows)
    return len(rows)


def read(c: Connection, district: str, as_of: datetime) -> list[Signal]:
    """The signals of the run at that moment, in its order; none if there was no run or it found nothing."""
    query = select(signal).where(signal.c.district == district, signal.c.as_of == as_of)
    return [_signal_of(row) for row in c.execute(query.order_by(signal.c.place_in_run))]


def _ids(c: Connection, district: str, as_of: datetime) -> set[tuple[str, datetime, str]]:
    query = select(signal.c.id).where(signal.c.district == district, signal.c.as_of == as_of)
    return {(district, as_of, id) for id in c.execute(query).scalars()}


def _row(record: Signal) -> dict[str, Any]:
    values = {name: getattr(record, name) for name in Signal.__dataclass_fields__}
    listed = {name: plain(values[name]) for name in ("cells", "figures", "evidence")}
    return values | listed | {"ask": record.ask.value}


def _signal_of(row: Row[Any]) -> Signal:
    values: dict[str, Any] = {name: getattr(row, name) for name in Signal.__dataclass_fields__}
    values["ask"] = Ask(row.ask)
    values["cells"] = tuple(row.cells)
    values["evidence"] = tuple(Evidence(**each) for each in row.evidence)
    return Signal(**values)
