"""Which step ran for which day: a step claims its row before it starts, so that no two run it at once.

The row's key is the job, the district and the local date it was due, so a clock change that repeats or
skips an hour still gives one run. A claim states when it expires; after that, another process may take it
over, and the late one can no longer finish it.
"""

from dataclasses import dataclass
from datetime import date, datetime, timedelta
from typing import Any

from sqlalchemy import JSON, Column, Connection, Date, Integer, Row, String, Table, and_, or_, select, update
from sqlalchemy.dialects import postgresql, sqlite

from rules.records import Figures
from service.store.base import UtcTime, metadata

EVERYWHERE = ""  # the district of a job that is not about one

job_run = Table(
    "job_run",
    metadata,
    Column("job", String, primary_key=True),
    Column("district", String, primary_key=True),
    Column("due", Date, primary_key=True),
    Column("attempt", Integer, nullable=False),
    Column("state", String, nullable=False),  # running, done, failed
    Column("claimed_at", UtcTime, nullable=False),
    Column("expires_at", UtcTime, nullable=False),
    Column("finished_at", UtcTime),
    Column("summary", JSON, nullable=False),  # counts of a run that is done, the reason of one that failed
)


@dataclass(frozen=True, slots=True)
class Run:
    """One run of a job; `attempt` tells its holder from an earlier one whose claim expired."""

    job: str
    district: str
    due: date
    attempt: int
    state: str
    claimed_at: datetime
    expires_at: datetime
    finished_at: datetime | None
    summary: Figures


def claim(
    c: Connection, job: str, district: str, due: date, *, now: datetime, lasts: timedelta, again: bool = False
) -> Run | None:
    """Claim a run, or None where it is done already or another process is at it.

    A failed run, and one whose claim expired, may be claimed anew; `again` does the same for one that is
    done, for a person who asks for it.
    """
    mine = {"state": "running", "claimed_at": now, "expires_at": now + lasts, "finished_at": None, "summary": {}}
    dialect = postgresql if c.dialect.name == "postgresql" else sqlite
    first = dialect.insert(job_run).values(job=job, district=district, due=due, attempt=1, **mine)
    # the row itself is asked back: after an INSERT only SQLite reports how many rows there were
    if c.execute(first.on_conflict_do_nothing().returning(job_run.c.attempt)).first() is not None:
        return get(c, job, district, due)
    free = or_(
        job_run.c.state.in_(["failed", "done"] if again else ["failed"]),
        and_(job_run.c.state == "running", job_run.c.expires_at <= now),
    )
    taken = update(job_run).where(_same(job, district, due), free).values(attempt=job_run.c.attempt + 1, **mine)
    return get(c, job, district, due) if c.execute(taken).rowcount == 1 else None


def finish(c: Connection, run: Run, *, now: datetime, summary: Figures, failed: bool = False) -> bool:
    """Record how a run ended; False where it is no longer its holder's, because the claim was taken over."""
    held = and_(_same(run.job, run.district, run.due), job_run.c.attempt == run.attempt, job_run.c.state == "running")
    ended = {"state": "failed" if failed else "done", "finished_at": now, "summary": dict(summary)}
    return c.execute(update(job_run).where(held).values(ended)).rowcount == 1


def get(c: Connection, job: str, district: str, due: date) -> Run | None:
    row = c.execute(select(job_run).where(_same(job, district, due))).one_or_none()
    return None if row is None else _run_of(row)


def runs(c: Connection, district: str, first_due: date) -> list[Run]:
    """The runs of a district due on or after a day, oldest first."""
    since = and_(job_run.c.district == district, job_run.c.due >= first_due)
    return [_run_of(row) for row in c.execute(select(job_run).where(since).order_by(job_run.c.due, job_run.c.job))]


def _same(job: str, district: str, due: date) -> Any:
    return and_(job_run.c.job == job, job_run.c.district == district, job_run.c.due == due)


def _run_of(row: Row[Any]) -> Run:
    return Run(**row._mapping)
