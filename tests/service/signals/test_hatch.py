"""Hatch signals: the worked autumn, what missing days do, and nothing peeked at."""

from collections.abc import Sequence
from dataclasses import replace
from datetime import UTC, date, datetime, timedelta
from typing import Any

import pytest

from rules.records import Ask, Known, Signal, Station, StationDay
from service.places import cell_of, place
from service.rulebook import load
from service.signals import evaluate, hatch
from tests.builders import LAT, LON, a_district
from tests.known import STATION, a_station_day, from_station, known

BOOK = load()
RULE = next(rule for rule in BOOK.rules if rule.id == "redlegged_earth_mite_hatch")
PEST = BOOK.pests["redlegged_earth_mite"]
OPENS = date(2026, 2, 15)  # the builders' district opens its season on 15 February
LAST = date(2026, 6, 30)
DAY = timedelta(days=1)
HERE = cell_of(LAT, LON)


def at(day: date) -> datetime:
    """Late in the morning of a day in the district."""
    return datetime(day.year, day.month, day.day, 2, tzinfo=UTC)


def autumn(rain_mm: float = 6.0) -> list[StationDay]:
    """The worked example: hot and dry; rain and a cool day on 1 April, mild on 2–11 April, cool from then on."""
    rows = []
    for i in range((LAST - OPENS).days + 1):
        day = OPENS + i * DAY
        mean = 25.0
        if day == date(2026, 4, 1) or day >= date(2026, 4, 12):
            mean = 15.0
        elif day > date(2026, 4, 1):
            mean = 18.0
        rows.append(a_station_day(day, mean, rain_mm if day == date(2026, 4, 1) else 0.0))
    return rows


def without(rows: Sequence[StationDay], *gone: date) -> list[StationDay]:
    return [row for row in rows if row.day not in gone]


def seen(rows: Sequence[StationDay], today: date = date(2026, 5, 12), **changes: Any) -> Known:
    return known(as_of=at(today), station_days=rows, weather=from_station(OPENS, LAST), **changes)


def signals(rows: Sequence[StationDay], today: date = date(2026, 5, 12), **changes: Any) -> list[Signal]:
    return hatch.evaluate(seen(rows, today, **changes), RULE, PEST)


# --- what is said --------------------------------------------------------------------------------


# The worked example of the published rule, by hand: rain on 1 April, so the cool run starts on 2 April;
# below 20.5 °C it is 2–11 April, below 16 °C it is 12–21 April.
@pytest.mark.parametrize(
    ("kind", "met", "below"), [("western", date(2026, 4, 11), 20.5), ("south-eastern", date(2026, 4, 21), 16.0)]
)
def test_the_worked_autumn(kind: str, met: date, below: float) -> None:
    (found,) = signals(autumn(), date(2026, 5, 5), district=a_district(temperature_type=kind))
    assert (found.kind, found.rule, found.pest, found.ask) == ("hatch", RULE.id, PEST.id, Ask.LOOK)
    assert (found.cells, found.paddock, found.rule_hash) == ((HERE,), None, RULE.hash)
    assert (found.first_day, found.last_day) == (met - 14 * DAY, met + 14 * DAY)
    assert found.figures == {
        "rain_day": "2026-04-01",
        "met_day": met.isoformat(),
        "earliest": (met - 14 * DAY).isoformat(),
        "latest": (met + 14 * DAY).isoformat(),
        "rain_mm": 6.0,
        "missing_days": 0,
        "temperature_type": kind,
        "cool_below": below,
        "cool_days": 10,
    }


def test_it_rests_on_the_station_days_from_the_rain_to_the_end_of_the_run() -> None:
    (found,) = signals(autumn())
    days = [f"st1/{(date(2026, 4, 1) + i * DAY).isoformat()}" for i in range(21)]
    assert [row.id for row in found.evidence] == days
    first = next(row for row in autumn() if row.day == date(2026, 4, 1))
    assert (found.evidence[0].table, found.evidence[0].version, found.evidence[0].digest) == (
        "station_day",
        1,
        first.digest,
    )
    # the station lies 0.1° (11.1 km) north of the point, whose cell is about 2.6 km across
    assert found.evidence[0].detail["km"] == pytest.approx(11.1, abs=1.5)


def test_a_station_out_of_reach_is_no_evidence() -> None:
    far = Station("far", "north", "Buoy Two", place(LAT + 2.0, LON))  # 222 km
    rows = [*autumn(), *(replace(row, station="far") for row in autumn())]
    one = known(
        as_of=at(date(2026, 5, 12)),
        stations=[STATION, far],
        station_days=rows,
        weather=lambda days: from_station(OPENS, LAST)([row for row in days if row.station == "st1"]),
    )
    (found,) = hatch.evaluate(one, RULE, PEST)
    assert {row.id.partition("/")[0] for row in found.evidence} == {"st1"}


def test_five_millimetres_exactly_starts_nothing() -> None:
    assert signals(autumn(rain_mm=5.0)) == []


def test_the_form_in_common_use_runs_beside_it() -> None:
    other = next(rule for rule in BOOK.rules if rule.id == "redlegged_earth_mite_hatch_week_of_cool")
    (found,) = hatch.evaluate(seen(autumn(), date(2026, 5, 5)), other, PEST)
    # by hand: 1–7 April are seven days of at most 20 °C with the wet day among them
    assert (found.figures["rain_day"], found.figures["met_day"]) == ("2026-04-01", "2026-04-07")
    assert (found.figures["cool_below"], found.figures["cool_days"], found.figures["rain_mm"]) == (20.0, 7, 6.0)
    assert found.evidence[0].id == "st1/2026-04-01"


def test_understudies_mail_nobody() -> None:
    live = evaluate(seen(autumn(), date(2026, 5, 5)), BOOK)
    assert [each.rule for each in live] == [RULE.id]


def test_it_is_news_for_four_weeks() -> None:
    met = date(2026, 4, 21)
    assert signals(autumn(), met - DAY) == []
    assert len(signals(autumn(), met + DAY)) == 1  # its last day arrives on the next
    assert len(signals(autumn(), met + 28 * DAY)) == 1
    assert signals(autumn(), met + 29 * DAY) == []


def test_rain_before_the_scan_starts_is_not_looked_at() -> None:
    early = [
        a_station_day(OPENS + i * DAY, 15.0, 20.0 if OPENS + i * DAY == date(2026, 2, 28) else 0.0) for i in range(80)
    ]
    assert signals(early, date(2026, 4, 20)) == []


def test_a_signal_for_each_day_it_was_met_on() -> None:
    other = cell_of(LAT - 1.0, LON)
    both = from_station(OPENS, LAST, [HERE, other])(autumn())
    both.tmin[(date(2026, 4, 15) - OPENS).days, 1] += 9  # one day of the second cell has a mean of 19.5 °C
    one = known(as_of=at(date(2026, 5, 12)), station_days=autumn(), weather=both)
    found = hatch.evaluate(one, RULE, PEST)
    assert [(each.figures["met_day"], each.cells) for each in found] == [
        ("2026-04-21", (HERE,)),
        ("2026-04-25", (other,)),
    ]


# --- missing days --------------------------------------------------------------------------------


def test_without_weather_there_is_no_claim() -> None:
    assert hatch.evaluate(known(as_of=at(date(2026, 5, 12)), weather=None), RULE, PEST) == []
    assert signals([]) == []


def test_a_missing_day_in_the_run_is_no_claim_until_a_whole_run_follows() -> None:
    gap = without(autumn(), date(2026, 4, 15))
    assert signals(gap, date(2026, 4, 23)) == []
    (found,) = signals(gap)
    # by hand: the run starts again on 16 April and is ten days long on 25 April; had the missing day been
    # cool, it would have been met on 21 April
    assert found.figures["met_day"] == "2026-04-25"
    assert (found.first_day, found.last_day) == (date(2026, 4, 21) - 14 * DAY, date(2026, 4, 25) + 14 * DAY)
    assert found.figures["missing_days"] == 1


def test_missing_rain_widens_the_span_and_is_never_rain() -> None:
    gone = date(2026, 3, 20)
    cool_before = [
        replace(row, tmin=9.0, tmax=19.0) if date(2026, 3, 20) < row.day < date(2026, 4, 1) else row
        for row in without(autumn(), gone)
    ]
    (found,) = signals(cool_before)
    # by hand: had it rained on 20 March, the cool run of 21–30 March would have met it on 30 March
    assert found.figures["met_day"] == "2026-04-21"
    assert found.first_day == date(2026, 3, 30) - 14 * DAY
    assert found.last_day == date(2026, 4, 21) + 14 * DAY
    assert found.figures["missing_days"] == 1


# --- what must not change it ---------------------------------------------------------------------


def test_nothing_later_is_peeked_at() -> None:
    today = date(2026, 4, 30)
    before = evaluate(seen(autumn(), today), BOOK)
    late = at(today) + timedelta(seconds=1)
    altered = [
        replace(row, version=2, tmin=30.0, tmax=40.0, digest="later", knowable_from=late)
        for row in autumn()
        if row.day <= today
    ]
    appended = [a_station_day(row.day, 2.0, 50.0, version=3, knowable_from=late) for row in autumn()]
    assert len(before) == 1
    assert evaluate(seen([*autumn(), *altered, *appended], today), BOOK) == before


def test_the_same_days_twice_make_no_new_claim() -> None:
    again = [replace(row, version=2) for row in autumn()]
    (once,), (twice,) = signals(autumn()), signals([*autumn(), *again])
    assert (twice.figures, twice.cells, twice.first_day, twice.last_day) == (
        once.figures,
        once.cells,
        once.first_day,
        once.last_day,
    )


def test_moved_500_km_it_says_the_same() -> None:
    north = LAT + 4.5  # 4.5° of latitude are 500 km
    station = replace(STATION, place=place(north + 0.1, LON))
    moved = known(
        as_of=at(date(2026, 5, 12)),
        district=a_district(latitude=north),
        stations=[station],
        station_days=autumn(),
        weather=from_station(OPENS, LAST, [cell_of(north, LON)]),
    )
    (there,), (here,) = hatch.evaluate(moved, RULE, PEST), signals(autumn())
    assert there.figures == here.figures
    assert (there.first_day, there.last_day) == (here.first_day, here.last_day)
    assert [row.id for row in there.evidence] == [row.id for row in here.evidence]


def test_the_same_content_has_the_same_name_whenever_it_is_worked_out() -> None:
    (tuesday,), (wednesday,) = signals(autumn(), date(2026, 5, 12)), signals(autumn(), date(2026, 5, 13))
    assert tuesday.id == wednesday.id
    assert tuesday.as_of != wednesday.as_of
    (wetter,) = signals(autumn(rain_mm=7.0))
    assert wetter.id != tuesday.id


def test_the_scan_follows_the_season_it_is_in() -> None:
    opens_late = replace(seen(autumn()), season_from=date(2025, 10, 1))
    assert hatch.scan_start(opens_late, "03-01") == date(2026, 3, 1)
    assert hatch.scan_start(seen(autumn()), "03-01") == date(2026, 3, 1)
