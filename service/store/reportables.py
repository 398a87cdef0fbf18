"""The closed table: reports that match a district's list of notifiable pests, kept apart from all others.

Nothing that counts, shows, exports or logs reads it.
"""

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from datetime import datetime
from typing import Any

from sqlalchemy import JSON, Column, Connection, String, Table, insert, select

from service.store.base import UtcTime, metadata

reportable_case = Table(
    "reportable_case",
    metadata,
    Column("number", String, primary_key=True),
    Column("district", String, nullable=False, index=True),
    Column("received_at", UtcTime, nullable=False),
    Column("row", JSON, nullable=False),
    Column("reporter", String),
)


@dataclass(frozen=True, slots=True)
class Case:
    """One matching row as it came. Its number is made from its content, so the same row is the same case."""

    number: str
    district: str
    received_at: datetime
    row: dict[str, Any]
    reporter: str | None


def save_cases(c: Connection, cases: Sequence[Case]) -> None:
    """Keep cases; one that is there already stays as it was."""
    known = set(c.scalars(select(reportable_case.c.number)))
    new = {case.number: asdict(case) for case in cases if case.number not in known}
    if new:
        c.execute(insert(reportable_case), list(new.values()))


def cases(c: Connection, district: str) -> list[Case]:
    """The cases of a district, for its named staff only; oldest first."""
    query = select(reportable_case).where(reportable_case.c.district == district)
    ordered = query.order_by(reportable_case.c.received_at, reportable_case.c.number)
    return [Case(row.number, row.district, row.received_at, row.row, row.reporter) for row in c.execute(ordered)]
