"""Missing weather is said to whoever it is missing for, and to nobody else."""

from datetime import UTC, date, datetime
from typing import Any

import pytest

from rules.records import CellDays
from rules.slip import SlipView
from service.editions import gate
from service.editions.wording import sentences
from service.places import cell_of
from tests.builders import LAT, LON, TODAY, a_postcode
from tests.known import cell_days
from tests.service.editions import cast
from tests.service.editions.goldens import NOT_SOWN, SOWN


def told(weather: CellDays | None, **changes: Any) -> SlipView:
    return cast.said(cast.edition(weather=weather, **({"paddocks": cast.fields(p0=SOWN)} | changes)))


def said(view: SlipView) -> list[str]:
    return [each.text for each in sentences(view) if each.origin == "reader:weather"]


def days(*ago: int) -> frozenset[int]:
    return frozenset(ago)


def test_nothing_is_said_where_all_came() -> None:
    assert said(told(cast.weather())) == []


@pytest.mark.parametrize(
    ("weather", "of_the_last"),
    [
        (cast.weather(no_rain=days(1, 2, 9)), "3 of the last 14 days"),
        (cast.weather(no_temperature=days(14)), "1 of the last 14 days"),
        (cast.weather(no_temperature=days(3), no_rain=days(3, 4)), "2 of the last 14 days"),  # day 3 lacks both
        (cast.weather(no_rain=days(*range(1, 15))), "all of the last 14 days"),
        (None, "all of the last 14 days"),
    ],
)
def test_missing_days_are_counted(weather: CellDays | None, of_the_last: str) -> None:
    text = f"Weather near you is missing for {of_the_last}, so we may miss a hatch."
    shown = told(weather)
    assert said(shown) == [text]
    assert text in [each.text for each in shown.silence]
    assert gate.check({"text": text}, ()) == []


def test_older_gaps_are_past() -> None:
    assert said(told(cast.weather(no_rain=days(15, 16)))) == []


def test_today_is_not_over_and_not_missing() -> None:
    assert cast.weather().rain.shape[0] == (TODAY - cast.OPENED).days  # it ends yesterday
    assert said(told(cast.weather())) == []


def test_only_the_readers_own_cells_count() -> None:
    """One who also lives where no weather is known is told; the weather of other farms is nobody's business."""
    at_p0 = cell_days(cast.OPENED, [12.0] * 86, [0.0] * 86, [cast.at(*cast.FARMS[0]).cell])
    here = {"9001": a_postcode(place=cast.at(*cast.FARMS[0]))}
    assert said(told(at_p0, postcodes=here)) == []
    assert said(told(at_p0, postcodes={"9001": a_postcode(place=cast.at(30, 30))})) != []


def test_with_asks_it_stands_in_the_foot() -> None:
    shown = cast.said(
        cast.edition(signals=[cast.hatch()], paddocks=cast.fields(p0=NOT_SOWN), weather=cast.weather(no_rain=days(2)))
    )
    assert shown.cards
    assert not shown.silence
    assert said(shown) == [each.text for each in shown.foot if each.origin == "reader:weather"]
    assert len(said(shown)) == 1


@pytest.mark.parametrize(
    ("day", "text"),
    [
        (date(2026, 2, 15), None),
        (date(2026, 2, 16), "Weather near you is missing for yesterday, so we may miss a hatch."),
        (date(2026, 2, 20), "Weather near you is missing for all of the last 5 days, so we may miss a hatch."),
    ],
)
def test_no_weather_is_missed_from_before_the_season_opened(day: date, text: str | None) -> None:
    noon = datetime(day.year, day.month, day.day, 2, tzinfo=UTC)
    here = cell_days(cast.OPENED, [], [], [cell_of(LAT, LON)])
    assert said(told(here, as_of=noon)) == ([text] if text else [])
