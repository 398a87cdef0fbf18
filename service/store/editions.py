"""Editions, their statements, and each reader's slip: kept as references and figures, never as text.

A statement's content is shared by all editions that say the same; what it rests on and whether it is held
belong to one edition. An edition that is signed no longer changes, except that a reader's slip may be deleted.
"""

import json
from collections.abc import Iterable, Iterator, Mapping, Sequence, Set
from datetime import date, datetime
from itertools import islice
from typing import Any, NamedTuple

from sqlalchemy import (
    JSON,
    CheckConstraint,
    Column,
    Connection,
    ForeignKey,
    Integer,
    Row,
    String,
    Table,
    and_,
    bindparam,
    delete,
    func,
    insert,
    select,
    update,
)

from rules.digests import canonical, plain
from rules.records import Ask, Evidence, Subscriber
from rules.slip import Basis, Edition, Head, Hold, Line, Slip, Statement
from service.errors import NotFound, WrongState
from service.store.base import UtcTime, metadata

SLIP_BYTES = 2000
PIECE = 500

edition = Table(
    "edition",
    metadata,
    Column("id", String, primary_key=True),
    Column("district", ForeignKey("district.id"), nullable=False, index=True),
    Column("week", String, nullable=False),
    Column("state", String, nullable=False),
    Column("as_of", UtcTime, nullable=False),
    Column("drafted_at", UtcTime, nullable=False),
    Column("drafted_by", String, nullable=False),
    Column("note", String, nullable=False),
    Column("hold_reason", String),
    Column("held_by", String),
    Column("held_at", UtcTime),
    Column("signed_at", UtcTime),
    Column("signed_by", String),
    Column("sent_at", UtcTime),
    Column("sent_by", String),
    Column("hashes", JSON, nullable=False),
    Column("head", JSON, nullable=False),  # what every slip shares, as it was then
    CheckConstraint("state IN ('draft', 'held', 'signed', 'sent')", name="state"),
)

statement = Table(
    "statement",
    metadata,
    Column("hash", String, primary_key=True),
    Column("body", JSON, nullable=False),
)

edition_statement = Table(
    "edition_statement",
    metadata,
    Column("edition", ForeignKey("edition.id"), primary_key=True),
    Column("hash", ForeignKey("statement.hash"), primary_key=True, index=True),
    Column("basis", JSON, nullable=False),
    Column("evidence", JSON, nullable=False),
    Column("held_reason", String),
    Column("held_by", String),
    Column("held_at", UtcTime),
)

slip = Table(
    "slip",
    metadata,
    Column("edition", ForeignKey("edition.id"), primary_key=True),
    Column("subscriber", ForeignKey("subscriber.id"), primary_key=True, index=True),
    Column("reader", String, nullable=False),  # where and what the reader farms, as it was then; canonical JSON
    Column("body", String, nullable=False),  # canonical JSON
    Column("bytes", Integer, nullable=False),
    Column("canonical_hash", String),  # of subject, text and HTML as rendered for signing
    CheckConstraint(f"bytes <= {SLIP_BYTES}", name="bytes"),
)


class Kept(NamedTuple):
    """A reader's slip as kept, with the hash of what was rendered of it for signing."""

    slip: Slip
    canonical_hash: str | None


# --- drafting ------------------------------------------------------------------------------------


def save_draft(
    c: Connection,
    record: Edition,
    statements: Iterable[Statement],
    slips: Iterable[Slip],
    readers: Iterable[Subscriber],
) -> list[str]:
    """Keep a draft with its recipients; an unsigned one of the same week is replaced, its holds are kept.

    Returns the held statements that the new draft no longer holds, whose figures have changed since: they
    have to be looked at again.
    """
    before = find(c, record.id)
    holds = held(c, record.id)
    if before is not None:
        _expect(before, "draft", "held")
        for table in (slip, edition_statement):
            c.execute(delete(table).where(table.c.edition == record.id))
        kept = ("state", "hold_reason", "held_by", "held_at")
        values = _edition_row(record) | {name: getattr(before, name) for name in kept}
        c.execute(update(edition).where(edition.c.id == record.id).values(values))
    else:
        c.execute(insert(edition).values(_edition_row(record)))
    given = {each.hash: each for each in statements}
    _save_statements(c, record.id, given, holds)
    recipients = {each.id: each for each in readers}
    for piece in _pieces(slips, PIECE):
        c.execute(insert(slip), [_slip_row(record.id, each, recipients[each.subscriber]) for each in piece])
    return sorted(set(holds) - set(given))


def _save_statements(c: Connection, id: str, given: Mapping[str, Statement], holds: Mapping[str, Hold]) -> None:
    known = set()
    for piece in _pieces(sorted(given), PIECE):
        known |= set(c.execute(select(statement.c.hash).where(statement.c.hash.in_(piece))).scalars())
    new = [{"hash": name, "body": _body(given[name])} for name in sorted(given) if name not in known]
    if new:
        c.execute(insert(statement), new)
    rows = [_beside(id, given[name], holds.get(name)) for name in sorted(given)]
    if rows:
        c.execute(insert(edition_statement), rows)


def _body(record: Statement) -> dict[str, Any]:
    return {name: plain(getattr(record, name)) for name in ("kind", "pest", "ask", "wording", "figures")}


def _beside(id: str, record: Statement, hold: Hold | None) -> dict[str, Any]:
    return {
        "edition": id,
        "hash": record.hash,
        "basis": plain(record.basis),
        "evidence": plain(record.evidence),
        "held_reason": hold.reason if hold else None,
        "held_by": hold.by if hold else None,
        "held_at": hold.at if hold else None,
    }


def _edition_row(record: Edition) -> dict[str, Any]:
    return {name: getattr(record, name) for name in Edition.__dataclass_fields__} | {"head": plain(record.head)}


def _slip_row(id: str, record: Slip, recipient: Subscriber) -> dict[str, Any]:
    body = canonical({name: getattr(record, name) for name in ("asks", "mind", "around", "own")})
    reader = canonical({name: getattr(recipient, name) for name in _READER})
    size = len(body.encode()) + len(reader.encode())
    return {"edition": id, "subscriber": record.subscriber, "reader": reader, "body": body, "bytes": size}


# --- reading -------------------------------------------------------------------------------------


def find(c: Connection, id: str) -> Edition | None:
    row = c.execute(select(edition).where(edition.c.id == id)).one_or_none()
    return None if row is None else _edition_of(row)


def get(c: Connection, id: str) -> Edition:
    """One edition; NotFound says which there are."""
    found = find(c, id)
    if found is None:
        newest = c.execute(select(edition.c.id).order_by(edition.c.drafted_at.desc()).limit(5)).scalars()
        known = ", ".join(newest) or "none yet; draft one first"
        raise NotFound(f"there is no edition {id!r} (there is: {known})")
    return found


def of_district(c: Connection, district: str) -> list[Edition]:
    """A district's editions, newest week first."""
    query = select(edition).where(edition.c.district == district).order_by(edition.c.week.desc())
    return [_edition_of(row) for row in c.execute(query)]


def statements(c: Connection, id: str) -> dict[str, Statement]:
    """An edition's statements by hash, held ones too."""
    query = (
        select(edition_statement, statement.c.body)
        .join(statement, statement.c.hash == edition_statement.c.hash)
        .where(edition_statement.c.edition == id)
        .order_by(edition_statement.c.hash)
    )
    return {row.hash: _statement_of(row) for row in c.execute(query)}


def held(c: Connection, id: str) -> dict[str, Hold]:
    """The statements of an edition that are kept from readers, and why."""
    query = select(edition_statement).where(edition_statement.c.edition == id, edition_statement.c.held_at.is_not(None))
    return {row.hash: Hold(row.held_reason, row.held_by, row.held_at) for row in c.execute(query)}


def slips(c: Connection, id: str, *, size: int = PIECE) -> Iterator[list[Kept]]:
    """All slips of an edition with their canonical hashes, by reader, in pieces."""
    last = ""
    while True:
        query = select(slip).where(slip.c.edition == id, slip.c.subscriber > last)
        rows = c.execute(query.order_by(slip.c.subscriber).limit(size)).all()
        if not rows:
            return
        yield [_kept(row) for row in rows]
        last = rows[-1].subscriber


def get_slip(c: Connection, id: str, subscriber: str) -> Kept | None:
    """One reader's slip and its canonical hash; None where there is none, or it was deleted with the reader."""
    row = c.execute(select(slip).where(slip.c.edition == id, slip.c.subscriber == subscriber)).one_or_none()
    return None if row is None else _kept(row)


def reader_of(c: Connection, id: str, subscriber: str) -> Subscriber | None:
    """A recipient as an edition knew them: where and what they farm, without name and address."""
    row = c.execute(select(slip.c.reader).where(slip.c.edition == id, slip.c.subscriber == subscriber)).one_or_none()
    if row is None:
        return None
    known = json.loads(row.reader)
    lists = {name: tuple(known[name]) for name in ("crops", "paddocks")}
    return Subscriber(id=subscriber, email="", name="", **(known | lists))


# --- deciding ------------------------------------------------------------------------------------


def hold_statement(c: Connection, id: str, name: str, *, reason: str, by: str, at: datetime) -> None:
    """Keep one statement from readers. Their slips change when the edition is drafted again."""
    _expect(get(c, id), "draft", "held")
    same = and_(edition_statement.c.edition == id, edition_statement.c.hash == name)
    hold = update(edition_statement).where(same).values(held_reason=reason, held_by=by, held_at=at)
    if not c.execute(hold).rowcount:
        raise NotFound(f"edition {id} has no statement {name!r}; see: leafturn edition show {id}")


def hold_edition(c: Connection, id: str, *, reason: str, by: str, at: datetime) -> None:
    """Keep the whole edition from being signed."""
    _expect(get(c, id), "draft")
    change = {"state": "held", "hold_reason": reason, "held_by": by, "held_at": at}
    c.execute(update(edition).where(edition.c.id == id).values(change))


def release(c: Connection, id: str, name: str | None = None) -> None:
    """Let go of a held statement, or of the held edition."""
    if name is None:
        _expect(get(c, id), "held")
        change = {"state": "draft", "hold_reason": None, "held_by": None, "held_at": None}
        c.execute(update(edition).where(edition.c.id == id).values(change))
        return
    _expect(get(c, id), "draft", "held")
    same = and_(
        edition_statement.c.edition == id, edition_statement.c.hash == name, edition_statement.c.held_at.is_not(None)
    )
    change = {"held_reason": None, "held_by": None, "held_at": None}
    if not c.execute(update(edition_statement).where(same).values(change)).rowcount:
        raise NotFound(f"edition {id} holds no statement {name!r}")


def expect_as_read(c: Connection, record: Edition, holds: Set[str]) -> None:
    """Lock an edition; WrongState unless it and its holds are still what somebody read who now signs it."""
    c.execute(select(edition.c.id).where(edition.c.id == record.id).with_for_update())
    if find(c, record.id) != record or held(c, record.id).keys() != holds:
        raise WrongState(f"edition {record.id} was changed by someone else meanwhile; look at it again")


def set_canonical(c: Connection, id: str, hashes: Mapping[str, str]) -> None:
    """Keep the hash of what was rendered for each of some readers; done in pieces before signing."""
    _expect(get(c, id), "draft")
    same = and_(slip.c.edition == id, slip.c.subscriber == bindparam("whose"))
    rows = [{"whose": reader, "rendered": name} for reader, name in sorted(hashes.items())]
    if rows:
        c.execute(update(slip).where(same).values(canonical_hash=bindparam("rendered")), rows)


def mark_signed(c: Connection, id: str, *, by: str, at: datetime) -> None:
    """Freeze an edition: one short change. Every slip must have its canonical hash by then."""
    _expect(get(c, id), "draft")
    without = select(func.count()).select_from(slip).where(slip.c.edition == id, slip.c.canonical_hash.is_(None))
    missing = c.execute(without).scalar_one()
    if missing:
        raise WrongState(f"edition {id} has {missing} digests that were not rendered yet; sign it again")
    _flip(c, id, "draft", {"state": "signed", "signed_by": by, "signed_at": at})


def mark_sent(c: Connection, id: str, *, by: str, at: datetime) -> None:
    """Let a signed edition go."""
    _expect(get(c, id), "signed")
    _flip(c, id, "signed", {"state": "sent", "sent_by": by, "sent_at": at})


def delete_reader(c: Connection, subscriber: str) -> int:
    """Delete all slips of a reader; returns how many there were. The trail then finds none."""
    return c.execute(delete(slip).where(slip.c.subscriber == subscriber)).rowcount


def _flip(c: Connection, id: str, state: str, change: Mapping[str, Any]) -> None:
    """Change a state that must still be as it was read."""
    if c.execute(update(edition).where(edition.c.id == id, edition.c.state == state).values(change)).rowcount != 1:
        raise WrongState(f"edition {id} was changed by someone else meanwhile; look at it again")


def _expect(record: Edition, *states: str) -> None:
    if record.state in states:
        return
    held_for = f" ({record.hold_reason})" if record.state == "held" else ""
    raise WrongState(f"edition {record.id} is {record.state}{held_for}; this needs one that is {' or '.join(states)}")


# --- rows and records ----------------------------------------------------------------------------


def _edition_of(row: Row[Any]) -> Edition:
    values = {name: getattr(row, name) for name in Edition.__dataclass_fields__}
    day, credits = date.fromisoformat(row.head["day"]), tuple(row.head["attributions"])
    values["head"] = Head(**(row.head | {"day": day, "attributions": credits}))
    return Edition(**values)


def _statement_of(row: Row[Any]) -> Statement:
    return Statement(
        hash=row.hash,
        kind=row.body["kind"],
        pest=row.body["pest"],
        ask=Ask(row.body["ask"]),
        wording=row.body["wording"],
        figures=row.body["figures"],
        basis=tuple(Basis(**each) for each in row.basis),
        evidence=tuple(Evidence(**each) for each in row.evidence),
    )


def _kept(row: Row[Any]) -> Kept:
    return Kept(slip_of(row.subscriber, row.body), row.canonical_hash)


def slip_of(subscriber: str, body: str) -> Slip:
    """A slip from its kept body."""
    kept = json.loads(body)
    lines = {part: tuple(Line(tuple(each["statements"]), each["own"]) for each in kept[part]) for part in _PARTS}
    return Slip(subscriber, lines["asks"], lines["mind"], lines["around"], kept["own"])


_PARTS = ("asks", "mind", "around")
_READER = ("district", "postcode", "crops", "paddocks", "holding", "person")


def _pieces(items: Iterable[Any], size: int) -> Iterator[Sequence[Any]]:
    rest = iter(items)
    while piece := list(islice(rest, size)):
        yield piece
