"""Rows that are added and never changed: a change is a newer version, and a read names its moment.

A table of versions has `version` in its primary key, beside what tells one thing from another, and the time
`knowable_from`. Where other rows refer to the thing, a table of its own holds its id and nothing else.
"""

from collections.abc import Iterable, Mapping
from datetime import UTC, datetime
from typing import Any

from sqlalchemy import Column, Connection, Integer, Select, Table, insert, select

from service.store.base import UtcTime

_EVER = datetime(9999, 12, 31, tzinfo=UTC)


def columns() -> list[Column[Any]]:
    """The columns that every table of versions has."""
    return [Column("version", Integer, primary_key=True), Column("knowable_from", UtcTime, nullable=False)]


def newest(table: Table, as_of: datetime) -> Select[Any]:
    """The newest version knowable at a moment of each thing in a table."""
    newer = table.alias("newer")
    replaced = select(newer.c.version).where(
        *(newer.c[name] == table.c[name] for name in _keys(table)),
        newer.c.version > table.c.version,
        newer.c.knowable_from <= as_of,
    )
    return select(table).where(table.c.knowable_from <= as_of, ~replaced.exists())


def add(c: Connection, table: Table, rows: Iterable[Mapping[str, Any]], knowable_from: datetime) -> int:
    """Add a version of each row that differs from the newest there is; returns how many were added.

    A version is never knowable before the one that it follows: what was read at a moment stays so.
    """
    keys = _keys(table)
    there = [dict(row) for row in c.execute(newest(table, _EVER)).mappings()]
    known = {tuple(row[name] for name in keys): row for row in there}
    added = []
    for row in rows:
        key = tuple(row[name] for name in keys)
        before = known.get(key)
        if before is not None and all(before[name] == value for name, value in row.items()):
            continue
        known[key] = _following(before, row, knowable_from)
        added.append(known[key])
    if added:
        c.execute(insert(table), added)
    return len(added)


def add_ids(c: Connection, table: Table, ids: Iterable[str]) -> None:
    """Keep the ids that are new, for other rows to refer to."""
    known = set(c.execute(select(table.c.id)).scalars())
    new = [{"id": id} for id in dict.fromkeys(ids) if id not in known]
    if new:
        c.execute(insert(table), new)


def _following(before: dict[str, Any] | None, row: Mapping[str, Any], knowable_from: datetime) -> dict[str, Any]:
    if before is None:
        return {**row, "version": 1, "knowable_from": knowable_from}
    later = max(knowable_from, before["knowable_from"])
    return {**row, "version": before["version"] + 1, "knowable_from": later}


def _keys(table: Table) -> list[str]:
    return [column.name for column in table.primary_key if column.name != "version"]
