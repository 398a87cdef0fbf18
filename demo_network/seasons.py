"""The invented district's calendar: its seasons, its live weeks, and the hour at which a week closes."""

from datetime import UTC, date, datetime, time, timedelta
from zoneinfo import ZoneInfo

from service.clock import week_days

HISTORY = {2024: "season1", 2025: "season2"}
LIVE = 2026
SEASONS = (*HISTORY, LIVE)
WEEKS = tuple(f"{LIVE}-W{number:02d}" for number in range(10, 31))
SIGNED = tuple(f"{LIVE}-W{number:02d}" for number in (13, 15, 18, 19, 20, 21, 22, 23, 26, 28))


def opens(year: int) -> date:
    """The day on which a season opens; its weather begins then."""
    return date(year, 2, 15)


def closes(year: int) -> date:
    """The last day of a season's records: spring in the past seasons, the last live week in this one."""
    return date(year, 10, 31) if year in HISTORY else cut_off(WEEKS[-1], "UTC").date()


def cut_off(week: str, zone: str) -> datetime:
    """Tuesday noon on the district's wall clock, in UTC: what came in later belongs to the next week."""
    tuesday = week_days(week)[0] + timedelta(days=1)
    return local(tuesday, 12, zone)


def local(day: date, hour: float, zone: str) -> datetime:
    """An hour of a local day, in UTC."""
    whole = datetime.combine(day, time(), ZoneInfo(zone)) + timedelta(hours=hour)
    return whole.astimezone(UTC)


def arrival_week(arrived: datetime, zone: str) -> str | None:
    """The live week whose digest is the first that can know of it; None where it comes after the last."""
    return next((week for week in WEEKS if arrived <= cut_off(week, zone)), None)


def days_of(week: str) -> list[date]:
    """The seven days, Tuesday to Monday, that end on the eve of the week's cut-off."""
    tuesday = week_days(week)[0] + timedelta(days=1)
    return [tuesday - timedelta(days=back) for back in range(7, 0, -1)]
