"""The only source of "now". Rehearsals and tests set it; nothing else reads the time of day."""

import re
from datetime import UTC, date, datetime, timedelta
from typing import Protocol
from zoneinfo import ZoneInfo


class Clock(Protocol):
    """Anything that says what time it is, in UTC."""

    def now(self) -> datetime: ...


class SystemClock:
    """The machine's own clock."""

    def now(self) -> datetime:
        return datetime.now(UTC)


class SetClock:
    """A clock that stands where it was put."""

    def __init__(self, at: datetime) -> None:
        self.set(at)

    def set(self, at: datetime) -> None:
        if at.tzinfo is None:
            raise ValueError("a clock needs a time with its zone")
        self._at = at.astimezone(UTC)

    def now(self) -> datetime:
        return self._at


def local_day(at: datetime, zone: str) -> date:
    """The date on the wall calendar of `zone` at that time."""
    return at.astimezone(ZoneInfo(zone)).date()


def end_of_day(day: date, zone: str) -> datetime:
    """The first moment after a local day, in UTC; right on the days that have 23 or 25 hours."""
    following = day + timedelta(days=1)
    return datetime(following.year, following.month, following.day, tzinfo=ZoneInfo(zone)).astimezone(UTC)


def iso_week(day: date) -> str:
    """The ISO week of a day, as 2026-W18."""
    year, week, _ = day.isocalendar()
    return f"{year}-W{week:02d}"


def week_days(week: str) -> tuple[date, date]:
    """Monday and Sunday of an ISO week written as 2026-W18."""
    parts = re.fullmatch(r"(\d{4})-W(\d{2})", week, re.ASCII)
    try:
        if parts is None:
            raise ValueError(week)
        monday = date.fromisocalendar(int(parts[1]), int(parts[2]), 1)
    except ValueError as error:
        raise ValueError(f"{week!r} is not an ISO week; write it as 2026-W18") from error
    return monday, monday + timedelta(days=6)
