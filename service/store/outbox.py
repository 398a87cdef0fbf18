"""The outbox: one row for each message that is to reach one reader, and one for each attempt.

    queued ──► leased ──► sending ──► sent | deferred | failed
      ▲           │          │            deferred ──► leased, when it is due again
      └───────────┴──────────┘            queued, deferred ──► expired
       a lease that ran out               queued, deferred, leased ──► withdrawn

A row holds no body. Its Message-ID is fixed when the row is written. `sending` is committed before the
server is given the message, so after a crash only `sending` is doubtful. How a worker takes rows and
gives them back is in `leases`.
"""

import hashlib
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from datetime import datetime
from typing import Any

from sqlalchemy import (
    BigInteger,
    CheckConstraint,
    Column,
    ColumnElement,
    Connection,
    ForeignKey,
    Index,
    Integer,
    String,
    Table,
    UniqueConstraint,
    bindparam,
    delete,
    func,
    select,
    update,
)
from sqlalchemy.dialects import postgresql, sqlite

from service.store import editions as _editions  # noqa: F401 - its table is referred to
from service.store.base import UtcTime, metadata

STATES = ("queued", "leased", "sending", "sent", "deferred", "failed", "expired", "withdrawn")
WAITING = ("queued", "deferred")
HELD = ("leased", "sending")
ANSWER_LENGTH = 300  # what is kept of a server's answer [characters]
PIECE = 500  # rows of one INSERT
NO_LEASE: dict[str, Any] = {"lease_until": None, "leased_by": None}

_serial = BigInteger().with_variant(Integer, "sqlite")  # SQLite numbers only INTEGER keys by itself


def state_in(states: Sequence[str]) -> ColumnElement[bool]:
    """A condition on the state with its values written out: only so can a partial index be used."""
    return outbox.c.state.in_(bindparam(None, list(states), expanding=True, literal_execute=True))


def held(state: str) -> tuple[ColumnElement[bool], ...]:
    """The condition on rows that a worker holds in one state; SQLite needs the index's own beside it."""
    return state_in(HELD), outbox.c.state == state


outbox = Table(
    "outbox",
    metadata,
    Column("id", _serial, primary_key=True),
    Column("kind", String, nullable=False),  # edition, correction, extra, notice
    Column("key", String, nullable=False),
    Column("district", ForeignKey("district.id"), nullable=False),
    Column("edition", ForeignKey("edition.id")),  # none for a notice, which nobody signs
    Column("subscriber", String, nullable=False),
    Column("domain", String, nullable=False),
    Column("state", String, nullable=False),
    Column("due", UtcTime, nullable=False),
    Column("attempts", Integer, nullable=False),
    Column("fence", Integer, nullable=False),
    Column("lease_until", UtcTime),
    Column("leased_by", String),
    Column("message_id", String, nullable=False),
    Column("expires_at", UtcTime, nullable=False),
    Column("last_answer", String),
    Column("mime_hash", String),
    Column("updated_at", UtcTime, nullable=False),
    UniqueConstraint("kind", "key"),
    CheckConstraint("state IN ({})".format(", ".join(f"'{state}'" for state in STATES)), name="state"),
)

delivery = Table(
    "delivery",
    metadata,
    Column("outbox", ForeignKey("outbox.id"), primary_key=True),
    Column("attempt", Integer, primary_key=True),
    Column("at", UtcTime, nullable=False),
    Column("code", Integer),  # none where the server gave none
    Column("answer", String, nullable=False),
    Column("outcome", String, nullable=False),
)


def _partial_index(name: str, states: Sequence[str], *columns: str) -> None:
    condition = state_in(states)
    Index(name, *(outbox.c[key] for key in columns), sqlite_where=condition, postgresql_where=condition)


# The work at hand is small beside all that was ever sent, so the indexes hold only that.
_partial_index("ix_outbox_waiting", WAITING, "edition", "due", "id")
_partial_index("ix_outbox_expiring", WAITING, "expires_at")
_partial_index("ix_outbox_held", HELD, "state", "lease_until")


@dataclass(frozen=True, slots=True)
class Outgoing:
    """A message to be written into the outbox; `key` is unique within its kind."""

    kind: str
    key: str
    district: str
    subscriber: str
    domain: str
    message_id: str
    due: datetime
    expires_at: datetime
    edition: str | None = None


@dataclass(frozen=True, slots=True)
class Attempt:
    """One attempt to hand a message to a server."""

    attempt: int
    at: datetime
    code: int | None
    answer: str
    outcome: str


def message_id(kind: str, key: str, host: str) -> str:
    """The Message-ID of one message, with its brackets; the same whenever it is asked for."""
    return f"<{hashlib.sha256(f'{kind}/{key}'.encode()).hexdigest()[:32]}@{host}>"


# --- writing -----------------------------------------------------------------------------------


def enqueue(c: Connection, rows: Sequence[Outgoing], now: datetime) -> int:
    """Write messages that are not there yet, by kind and key; returns how many are new."""
    dialect = sqlite if c.dialect.name == "sqlite" else postgresql
    fresh = {"state": "queued", "attempts": 0, "fence": 0, "updated_at": now}
    new = 0
    for start in range(0, len(rows), PIECE):
        values = [asdict(row) | fresh for row in rows[start : start + PIECE]]
        fresh_rows = dialect.insert(outbox).values(values).on_conflict_do_nothing(index_elements=["kind", "key"])
        new += len(c.scalars(fresh_rows.returning(outbox.c.id)).all())
    return new


def forget_unsigned(c: Connection, edition: str) -> int:
    """Remove what a signing that did not end has written: rows that nobody could claim yet."""
    return c.execute(delete(outbox).where(outbox.c.edition == edition, outbox.c.attempts == 0)).rowcount


def expire(c: Connection, now: datetime) -> int:
    """Give up what could not be delivered in its time."""
    return change(
        c, (state_in(WAITING), outbox.c.expires_at <= now), {"state": "expired", "updated_at": now} | NO_LEASE
    )


def withdraw(c: Connection, edition: str, now: datetime) -> int:
    """Take back all rows of an edition that no server has been given."""
    values = {"state": "withdrawn", "updated_at": now} | NO_LEASE
    of_edition = outbox.c.edition == edition
    return sum(change(c, (*condition, of_edition), values) for condition in ((state_in(WAITING),), held("leased")))


# --- reading -----------------------------------------------------------------------------------


def counts(c: Connection, edition: str | None = None) -> dict[str, int]:
    """How many rows are in each state, of one edition or of all; a state without rows counts 0."""
    query = select(outbox.c.state, func.count()).group_by(outbox.c.state)
    if edition is not None:
        query = query.where(outbox.c.edition == edition)
    found = {row[0]: row[1] for row in c.execute(query)}
    return {state: found.get(state, 0) for state in STATES}


def attempts(c: Connection, kind: str, key: str) -> list[Attempt]:
    """Every attempt to deliver one message, oldest first."""
    names = [delivery.c[name] for name in Attempt.__dataclass_fields__]
    query = select(*names).join(outbox, outbox.c.id == delivery.c.outbox).order_by(delivery.c.attempt)
    return [Attempt(*row) for row in c.execute(query.where(outbox.c.kind == kind, outbox.c.key == key))]


# --- shared with leases ------------------------------------------------------------------------


def change(c: Connection, condition: Sequence[ColumnElement[bool]], values: dict[str, Any]) -> int:
    """Change all rows of a condition, locked in the order of their ids so that no two writers cross."""
    if c.dialect.name != "sqlite":  # which has one writer at a time
        c.execute(select(outbox.c.id).where(*condition).order_by(outbox.c.id).with_for_update())
    return c.execute(update(outbox).where(*condition).values(values)).rowcount
