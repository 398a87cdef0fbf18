"""Time: local days where the clocks change, and ISO weeks at the turn of the year."""

from datetime import UTC, date, datetime, timedelta, timezone

import pytest

from service.clock import SetClock, SystemClock, end_of_day, iso_week, local_day, week_days


def test_a_set_clock_stands_where_it_was_put() -> None:
    clock = SetClock(datetime(2026, 5, 12, 11, 30, tzinfo=timezone(timedelta(hours=9, minutes=30))))
    assert clock.now() == clock.now() == datetime(2026, 5, 12, 2, 0, tzinfo=UTC)
    assert clock.now().tzinfo is UTC
    clock.set(datetime(2026, 5, 13, tzinfo=UTC))
    assert clock.now() == datetime(2026, 5, 13, tzinfo=UTC)


def test_a_clock_needs_a_zone() -> None:
    with pytest.raises(ValueError, match="zone"):
        SetClock(datetime(2026, 5, 12))  # noqa: DTZ001 (that is what is refused)


def test_the_systems_clock_says_utc() -> None:
    before = datetime.now(UTC)
    assert before <= SystemClock().now() <= datetime.now(UTC)


def test_the_local_day_is_the_one_on_the_wall() -> None:
    late = datetime(2026, 5, 12, 14, 29, 59, tzinfo=UTC)  # Adelaide is UTC+9:30 in May: 23:59:59
    assert local_day(late, "Australia/Adelaide") == date(2026, 5, 12)
    assert local_day(late + timedelta(seconds=1), "Australia/Adelaide") == date(2026, 5, 13)
    assert local_day(late, "America/Los_Angeles") == date(2026, 5, 12)


# Changes of the clocks in 2026 as the IANA zone data have them:
# Adelaide ends UTC+10:30 on 5 April and begins it again on 4 October; Santiago goes from UTC-4 to -3 at midnight
# of 6 September, so that day has no 00:00, and back on 5 April at 24:00 of the 4th, so 23:00 to 24:00 comes twice.
@pytest.mark.parametrize(
    ("zone", "day", "hours"),
    [
        ("Australia/Adelaide", date(2026, 4, 4), 24),
        ("Australia/Adelaide", date(2026, 4, 5), 25),
        ("Australia/Adelaide", date(2026, 10, 4), 23),
        ("America/Santiago", date(2026, 9, 5), 24),
        ("America/Santiago", date(2026, 9, 6), 23),
        ("America/Santiago", date(2026, 4, 4), 25),
        ("Australia/Perth", date(2026, 10, 4), 24),
    ],
)
def test_a_day_ends_where_the_next_begins_whatever_the_clocks_do(zone: str, day: date, hours: int) -> None:
    start, end = end_of_day(day - timedelta(days=1), zone), end_of_day(day, zone)
    assert end - start == timedelta(hours=hours)
    assert local_day(start, zone) == local_day(end - timedelta(microseconds=1), zone) == day
    assert local_day(end, zone) == day + timedelta(days=1)
    assert local_day(start - timedelta(microseconds=1), zone) == day - timedelta(days=1)


def test_the_end_of_a_day_is_given_in_utc() -> None:
    assert end_of_day(date(2026, 5, 12), "Australia/Adelaide") == datetime(2026, 5, 12, 14, 30, tzinfo=UTC)
    assert end_of_day(date(2026, 5, 12), "Australia/Adelaide").tzinfo is UTC


# ISO 8601: week 1 is the one with the year's first Thursday; 2026 begins on a Thursday and so has 53 weeks.
@pytest.mark.parametrize(
    ("day", "week"),
    [
        (date(2026, 5, 12), "2026-W20"),
        (date(2026, 1, 1), "2026-W01"),
        (date(2025, 12, 29), "2026-W01"),
        (date(2025, 12, 28), "2025-W52"),
        (date(2026, 12, 31), "2026-W53"),
        (date(2027, 1, 3), "2026-W53"),
        (date(2027, 1, 4), "2027-W01"),
    ],
)
def test_weeks_are_those_of_iso_8601(day: date, week: str) -> None:
    assert iso_week(day) == week
    monday, sunday = week_days(week)
    assert monday <= day <= sunday
    assert (monday.weekday(), sunday - monday) == (0, timedelta(days=6))


@pytest.mark.parametrize("week", ["2025-W53", "2026-W00", "2026-W54", "2026-W1", "2026W18", "2026-18", " 2026-W18", ""])
def test_what_is_no_week_is_refused(week: str) -> None:
    with pytest.raises(ValueError, match="write it as 2026-W18"):
        week_days(week)
