"""How a worker takes rows of the outbox and gives them back: leases, fences, results, recovery.

Each claim raises the row's `fence`; whoever held an older one can change nothing any more.

Leases are measured with the clock that the caller passes in, like every other time in the service: all
processes of one service share a machine's clock, or keep theirs within far less than a lease.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import Any, TypeVar

from sqlalchemy import (
    ColumnElement,
    Connection,
    Select,
    bindparam,
    exists,
    func,
    select,
    update,
)
from sqlalchemy.dialects import postgresql, sqlite

from service.store.base import UtcTime
from service.store.editions import edition
from service.store.outbox import ANSWER_LENGTH, HELD, NO_LEASE, WAITING, change, delivery, held, outbox, state_in

T = TypeVar("T")
Work = Callable[[Connection], T]  # what a worker does in one transaction


@dataclass(frozen=True, slots=True)
class Job:
    """A claimed row: what is to be sent, and the number that proves the claim."""

    id: int
    fence: int
    kind: str
    key: str
    district: str
    edition: str | None
    subscriber: str
    domain: str
    message_id: str
    attempts: int
    expires_at: datetime


@dataclass(frozen=True, slots=True)
class Result:
    """What became of a claimed row: its next state, and what the server said."""

    job: Job
    state: str
    outcome: str
    answer: str
    code: int | None = None
    due: datetime | None = None


@dataclass(frozen=True, slots=True)
class _Held:
    id: int
    fence: int
    attempts: int
    state: str


# --- taking rows and giving them back ----------------------------------------------------------


def claim(c: Connection, worker: str, now: datetime, n: int, lease_s: float) -> list[Job]:
    """Lease up to `n` rows that may go out now: notices first, then the rows of sent editions."""
    _in_index_order(c)
    ids: list[int] = []
    for source in (None, *_editions_with_mail(c, now)):
        if len(ids) < n:
            ids += c.scalars(_due_rows(source, now, n - len(ids)))
    if not ids:
        return []
    values: dict[str, Any] = {"state": "leased", "fence": outbox.c.fence + 1, "leased_by": worker}
    values |= {"lease_until": now + timedelta(seconds=lease_s), "updated_at": now}
    c.execute(update(outbox).where(outbox.c.id.in_(ids)).values(values))
    rows = c.execute(select(*(outbox.c[name] for name in Job.__dataclass_fields__)).where(outbox.c.id.in_(ids)))
    order = {id: place for place, id in enumerate(ids)}
    return sorted((Job(**row._mapping) for row in rows), key=lambda job: order[job.id])


def mark_sending(c: Connection, hashes: Sequence[tuple[Job, str]], now: datetime, lease_until: datetime) -> set[int]:
    """Mark rows as about to be given to the server, with the hash of their MIME; returns those still ours."""
    ours = _still_ours(c, [job for job, _ in hashes], ("leased",))
    rows = [
        {"row": job.id, "hash": digest, "until": lease_until, "at": now} for job, digest in hashes if job.id in ours
    ]
    if rows:
        c.execute(_MARK, rows)
    return set(ours)


def record(c: Connection, results: Sequence[Result], now: datetime) -> set[int]:
    """Record what became of claimed rows; returns those that were still ours to record."""
    ours = _still_ours(c, [result.job for result in results], HELD)
    kept = [result for result in results if result.job.id in ours]
    if kept:
        c.execute(_RECORD, [_recorded(result, now) for result in kept])
    tried = [(result, ours[result.job.id]) for result in kept if ours[result.job.id].state == "sending"]
    _append(c, [_attempt(result, row, now) for result, row in tried])
    return set(ours)


def renew(c: Connection, worker: str, now: datetime, lease_until: datetime) -> int:
    """Lengthen the leases that a worker holds; one that has run out is not taken back."""
    mine = (state_in(HELD), outbox.c.leased_by == worker, outbox.c.lease_until > now)
    return change(c, mine, {"lease_until": lease_until, "updated_at": now})


def release(c: Connection, worker: str, now: datetime) -> int:
    """Put back what a worker leased and has not begun to send."""
    mine = (*held("leased"), outbox.c.leased_by == worker)
    return change(c, mine, {"state": "queued", "updated_at": now} | NO_LEASE)


def recover(c: Connection, now: datetime, doubtful: str = "retry") -> dict[str, int]:
    """After a crash: requeue what was leased, and note as doubtful what was being sent.

    A doubtful message may or may not have been accepted. `retry` sends it again with the same Message-ID;
    `hold` leaves it where a person can see it.
    """
    run_out = outbox.c.lease_until <= now
    back = {"state": "queued", "updated_at": now} | NO_LEASE
    returned = change(c, (*held("leased"), run_out), back)
    sending = (*held("sending"), run_out)
    lost = c.execute(select(outbox.c.id, outbox.c.attempts).where(*sending).order_by(outbox.c.id).with_for_update())
    text = "the process ended before the answer was recorded"
    found = [{"outbox": row.id, "attempt": row.attempts, "at": now, "answer": text} for row in lost]
    _append(c, [attempt | {"code": None, "outcome": "doubtful"} for attempt in found])
    if doubtful == "retry":
        change(c, sending, back)
    return {"returned": returned, "doubtful": len(found)}


# --- inside ------------------------------------------------------------------------------------

_MARK = (
    update(outbox)
    .where(outbox.c.id == bindparam("row"))
    .values(
        state="sending",
        attempts=outbox.c.attempts + 1,
        mime_hash=bindparam("hash"),
        lease_until=bindparam("until", type_=UtcTime),
        updated_at=bindparam("at", type_=UtcTime),
    )
)

_RECORD = (
    update(outbox)
    .where(outbox.c.id == bindparam("row"))
    .values(
        state=bindparam("next"),
        due=func.coalesce(bindparam("next_due", type_=UtcTime), outbox.c.due),
        last_answer=bindparam("said"),
        lease_until=bindparam("until", type_=UtcTime),
        leased_by=None,
        updated_at=bindparam("at", type_=UtcTime),
    )
)


def _recorded(result: Result, now: datetime) -> dict[str, Any]:
    said = f"{result.code} {result.answer}" if result.code else result.answer
    until = now if result.state == "sending" else None  # doubtful, and left so: its lease ends here
    return {
        "row": result.job.id,
        "next": result.state,
        "next_due": result.due,
        "said": said[:ANSWER_LENGTH],
        "until": until,
        "at": now,
    }


def _attempt(result: Result, row: _Held, now: datetime) -> dict[str, Any]:
    said = {"code": result.code, "answer": result.answer[:ANSWER_LENGTH], "outcome": result.outcome}
    return {"outbox": row.id, "attempt": row.attempts, "at": now} | said


def _append(c: Connection, rows: list[dict[str, Any]]) -> None:
    """Add attempts; one that is on record already stays as it is."""
    if rows:
        dialect = sqlite if c.dialect.name == "sqlite" else postgresql
        c.execute(dialect.insert(delivery).on_conflict_do_nothing(), rows)


def _still_ours(c: Connection, jobs: Sequence[Job], states: Sequence[str]) -> dict[int, _Held]:
    """Lock the rows whose fence is still the one that was claimed, by id."""
    fences = {job.id: job.fence for job in jobs}
    query = select(outbox.c.id, outbox.c.fence, outbox.c.attempts, outbox.c.state)
    rows = c.execute(query.where(outbox.c.id.in_(fences)).order_by(outbox.c.id).with_for_update())
    found = (_Held(*row) for row in rows)
    return {row.id: row for row in found if row.fence == fences[row.id] and row.state in states}


def _in_index_order(c: Connection) -> None:
    """Before its first statistics PostgreSQL takes the queue for short, and would read and sort all of it."""
    if c.dialect.name != "sqlite":
        c.exec_driver_sql("SET LOCAL enable_sort = off")


def _ready(now: datetime) -> tuple[ColumnElement[bool], ...]:
    return state_in(WAITING), outbox.c.due <= now, outbox.c.expires_at > now


def _editions_with_mail(c: Connection, now: datetime) -> list[str]:
    """Sent editions with rows to send. Rows of an unsigned edition are never even looked at."""
    waiting = exists().where(outbox.c.edition == edition.c.id, *_ready(now))
    return list(c.scalars(select(edition.c.id).where(edition.c.state == "sent", waiting).order_by(edition.c.id)))


def _due_rows(source: str | None, now: datetime, n: int) -> Select[tuple[int]]:
    in_source = outbox.c.edition.is_(None) if source is None else outbox.c.edition == source
    rows = select(outbox.c.id).where(in_source, *_ready(now)).order_by(outbox.c.edition, outbox.c.due, outbox.c.id)
    return rows.limit(n).with_for_update(skip_locked=True)
