"""The hatch weather is met where and when it is planted, and at no mast of that district without it.

The rule is written here once more, by hand and mast by mast, from its published form (the district's
south-eastern constant): the first day since 1 March with more than 5 mm of rain, then ten days in a row
with a mean under 16 °C, from the day after (Exp Appl Acarol 65:259-276, 2015).
"""

from collections.abc import Callable
from datetime import date, timedelta
from pathlib import Path

import pytest

from tests.demo_network.reading import rows, weather

MASTS = ("a-s1", "a-s2", "a-s3", "a-s4")
WINDOW_ENDS = date(2026, 5, 25)  # the eve of the last digest that may speak of the planted hatch


def met(days: dict[date, tuple[float, float | None]], rain_days: int) -> date | None:
    rained, run = None, 0
    for day in (date(2026, 3, 1) + timedelta(days=n) for n in range(142)):
        mean, _ = days.get(day, (99.0, None))
        if rained:
            run = run + 1 if mean < 16 else 0
            if run == 10:
                return day
        else:
            fallen = [days.get(day - timedelta(days=back), (0.0, None))[1] or 0.0 for back in range(rain_days)]
            rained = day if sum(fallen) > 5 else None
    return None


def test_the_rule_as_written_here_gives_the_worked_example() -> None:
    # 6 mm on 1 April; means of 15 on 1 April, 18 on 2-11 April, 15 from 12 April on: met on 21 April,
    # the tenth cool day (worked by hand)
    days = {date(2026, 4, 1): (15.0, 6.0)}
    days |= {date(2026, 4, n): (18.0, 0.0) for n in range(2, 12)}
    days |= {date(2026, 4, n): (15.0, 0.0) for n in range(12, 31)}
    assert met(days, 1) == date(2026, 4, 21)


@pytest.mark.parametrize("mast", MASTS)
@pytest.mark.parametrize("rain_days", [1, 5])  # the rain of one day, or the sum of five
def test_the_planted_weather_meets_the_rule_at_every_mast(files: Path, mast: str, rain_days: int) -> None:
    when = met(weather(files, 2026)[mast], rain_days)
    assert when is not None
    assert date(2026, 5, 1) <= when <= date(2026, 5, 4)  # known at the cut-off of Tuesday 5 May, W19


@pytest.mark.parametrize("mast", MASTS)
@pytest.mark.parametrize("rain_days", [1, 5])
def test_without_it_the_rule_is_not_met_in_its_window(
    files_without: Callable[..., Path], mast: str, rain_days: int
) -> None:
    when = met(weather(files_without("hatch"), 2026)[mast], rain_days)
    assert when is None or when > WINDOW_ENDS


def test_the_planted_weather_stands_clear_of_the_limits(files: Path) -> None:
    """No mast day of the spell is within a degree of 16, and the rain far above 5 mm."""
    found = weather(files, 2026)
    for mast in MASTS:
        spell = [found[mast][day] for n in range(15) if (day := date(2026, 4, 21) + timedelta(days=n)) in found[mast]]
        assert len(spell) >= 13
        assert max(mean for mean, _ in spell) < 15
        assert spell[0][1] is not None
        assert spell[0][1] > 10


def test_means_follow_the_season_and_neighbours_agree(files: Path) -> None:
    for year in (2024, 2025, 2026):
        found = weather(files, year)
        for mast in found:
            march, july = ([mean for day, (mean, _) in found[mast].items() if day.month == month] for month in (3, 7))
            assert sum(march) / len(march) > sum(july) / len(july) + 6
        apart = [abs(found["a-s1"][day][0] - found["a-s3"][day][0]) for day in found["a-s1"] if day in found["a-s3"]]
        assert sum(apart) / len(apart) < 1.5


def test_higher_masts_are_cooler_by_the_lapse_rate(files: Path) -> None:
    heights = {row["id"]: float(row["elevation_m"]) for row in rows(files / "network/stations.csv")}
    found = weather(files, 2025)
    means = {mast: sum(mean for mean, _ in days.values()) / len(days) for mast, days in found.items()}
    for letter in "ab":
        low, *_, high = sorted((mast for mast in heights if mast[0] == letter), key=lambda mast: heights[mast])
        fall = 6.5 * (heights[high] - heights[low]) / 1000
        assert means[low] - means[high] == pytest.approx(fall, abs=0.15)


def test_some_days_are_missing_and_never_a_whole_district_at_once(files: Path) -> None:
    for year, expected in ((2024, 260), (2025, 259), (2026, 156)):  # 15 February to 31 October; to 20 July
        found = weather(files, year)
        missing = sum(expected - len(days) for days in found.values())
        assert 0 < missing < 8 * expected * 0.03
        for letter in "ab":
            known = {day for mast, days in found.items() if mast[0] == letter for day in days}
            assert len(known) >= expected
