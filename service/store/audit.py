"""Who did what, when and why. Entries are added and read; nothing here changes or removes one."""

from dataclasses import dataclass
from datetime import datetime

from sqlalchemy import JSON, BigInteger, Column, Connection, Integer, String, Table, insert, select

from rules.digests import plain
from rules.records import Figures
from service.store.base import UtcTime, metadata

audit_entry = Table(
    "audit_entry",
    metadata,
    # SQLite numbers rows by itself only where the key is its own INTEGER type
    Column("number", BigInteger().with_variant(Integer(), "sqlite"), primary_key=True, autoincrement=True),
    Column("at", UtcTime, nullable=False, index=True),
    Column("who", String, nullable=False),
    Column("what", String, nullable=False, index=True),
    Column("subject", String, nullable=False, index=True),
    Column("why", String, nullable=False),
    Column("detail", JSON, nullable=False),
)


@dataclass(frozen=True, slots=True)
class Entry:
    """One thing that a person did: `what` names the act, `subject` the thing it was done to."""

    number: int
    at: datetime
    who: str
    what: str
    subject: str
    why: str
    detail: Figures


def add(
    c: Connection, *, who: str, at: datetime, what: str, subject: str, why: str, detail: Figures | None = None
) -> int:
    """Add an entry; returns its number. Without a person and a reason there is nothing to look up later."""
    if not who.strip() or not why.strip():
        raise ValueError(f"an entry about {what!r} needs who did it and why")
    values = {"at": at, "who": who, "what": what, "subject": subject, "why": why, "detail": plain(detail or {})}
    added = c.execute(insert(audit_entry).values(values).returning(audit_entry.c.number))
    return int(added.scalar_one())


def entries(c: Connection, *, subject: str | None = None, what: str | None = None) -> list[Entry]:
    """Entries in the order they were added: all of them, of one subject, or of one act."""
    query = select(audit_entry).order_by(audit_entry.c.number)
    if subject is not None:
        query = query.where(audit_entry.c.subject == subject)
    if what is not None:
        query = query.where(audit_entry.c.what == what)
    return [Entry(**row._mapping) for row in c.execute(query)]
