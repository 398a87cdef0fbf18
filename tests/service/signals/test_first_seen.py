"""The first find of a season: named once, early only after allowing for the looking."""

from dataclasses import replace
from datetime import UTC, date, datetime, timedelta
from typing import Any

import pytest

from rules.records import Ask, Observation, Signal, Why
from service.places import place
from service.rulebook import load
from service.signals import evaluate, first_seen
from tests.builders import LAT, LON, NOW, TODAY, a_district, an_observation
from tests.known import known

BOOK = load()
FLEA = BOOK.pests["lucerne_flea"]
RULE = next(rule for rule in BOOK.rules if rule.id == "lucerne_flea_first_seen")
DAY = timedelta(days=1)


def a_row(key: str, day: date, *, found: bool, **changes: Any) -> Observation:
    """A look for lucerne flea with five spots of ten leaves, known on the day after."""
    at = datetime(day.year, day.month, day.day, 2, tzinfo=UTC)
    values: dict[str, Any] = {
        "pest": "lucerne_flea",
        "present": found,
        "day": day,
        "crop": "canola",
        "stage": 12,
        "unit": "holes_per_leaf",
        "spot_counts": (1.0,) * 5 if found else (0.0,) * 5,
        "units_per_spot": 10,
        "units_sampled": 50,
        "arrived_at": at,
        "knowable_from": at,
    }
    return an_observation(key, **(values | changes))


def season(year: int, first_find: date, looks_a_week: int = 2, until: date | None = None) -> list[Observation]:
    """Looks on every Monday from the season's opening on; each finds the flea from a day on."""
    rows = []
    day = date(year, 2, 16)
    last = until or date(year, 7, 31)
    while day <= last:
        for i in range(looks_a_week):
            rows.append(a_row(f"{day}:{i}", day, found=day >= first_find, reporter=f"r{i}"))
        day += 7 * DAY
    return rows


def past(*years: int) -> list[Observation]:
    """Seasons in which the flea was found from June on, with eight looks a week."""
    return [row for year in years for row in season(year, date(year, 6, 1), looks_a_week=8)]


def now(looks_a_week: int = 1) -> list[Observation]:
    """This season: found yesterday for the first time."""
    return season(2026, TODAY - DAY, looks_a_week, until=TODAY)


def signals(rows: list[Observation], **changes: Any) -> list[Signal]:
    return first_seen.evaluate(known(observations=rows, **changes), RULE, FLEA)


# --- what is said --------------------------------------------------------------------------------


def test_the_first_find_is_named_with_the_looks_behind_it() -> None:
    rows = [a_row("a", TODAY - 9 * DAY, found=False), a_row("b", TODAY - 2 * DAY, found=True)]
    (found,) = signals(rows)
    assert (found.kind, found.ask, found.paddock, found.pest) == ("first_seen", Ask.LOOK, None, "lucerne_flea")
    assert found.cells == (rows[1].place.cell,)
    assert (found.first_day, found.last_day) == (TODAY - 2 * DAY, TODAY + 12 * DAY)
    assert found.figures == {
        "day": (TODAY - 2 * DAY).isoformat(),
        "finds": 1,
        "looks": 2,
        "chance": None,
        "past_seasons": 0,
        "earliest_of": None,
        "earlier_than_usual": False,
        "cell": rows[1].place.cell,
    }
    assert [(each.table, each.id, each.digest) for each in found.evidence] == [("observation", "b", rows[1].digest)]


def test_a_find_three_weeks_before_the_usual_is_early() -> None:
    rows = past(2021, 2022, 2023, 2024, 2025) + now()
    (found,) = signals(rows)
    assert found.figures["past_seasons"] == 5
    assert found.figures["chance"] <= 0.10
    assert found.figures["earlier_than_usual"] is True


def test_with_three_past_seasons_it_is_not_called_early() -> None:
    (found,) = signals(past(2023, 2024, 2025) + now())
    assert (found.figures["past_seasons"], found.figures["earlier_than_usual"]) == (3, False)


def test_more_looking_makes_early_less_remarkable() -> None:
    usual = signals(past(2021, 2022, 2023, 2024) + now())
    often = signals(past(2021, 2022, 2023, 2024) + now(looks_a_week=8))
    assert often[0].figures["chance"] > usual[0].figures["chance"]


def test_the_earliest_of_the_seasons_that_can_tell() -> None:
    """By hand: found on 11 May; past seasons found it on the first look day from 1 June on."""
    assert signals(past(2023, 2024, 2025) + now())[0].figures["earliest_of"] == 4
    as_early = season(2022, date(2022, 4, 1))
    assert signals([*past(2023, 2024, 2025), *as_early, *now()])[0].figures["earliest_of"] is None
    looked_later = [row for row in past(2025) if row.day > date(2025, 6, 1)]
    assert signals([*past(2023, 2024), *looked_later, *now()])[0].figures["earliest_of"] == 3
    assert signals(looked_later + now())[0].figures["earliest_of"] is None


@pytest.mark.parametrize(
    ("crop", "stage", "ask"),
    [
        ("canola", 12, Ask.LOOK),
        ("canola", None, Ask.LOOK),
        ("canola", 65, Ask.KEEP_IN_MIND),
        (None, None, Ask.KEEP_IN_MIND),
    ],
)
def test_it_asks_for_a_look_only_where_it_may_matter(crop: str | None, stage: int | None, ask: Ask) -> None:
    (found,) = signals([a_row("a", TODAY, found=True, crop=crop, stage=stage)])
    assert found.ask == ask


# --- when nothing is said ------------------------------------------------------------------------


def test_it_is_news_for_two_weeks() -> None:
    assert len(signals([a_row("a", TODAY - 14 * DAY, found=True)])) == 1
    assert signals([a_row("a", TODAY - 15 * DAY, found=True)]) == []


def test_a_later_find_is_no_first() -> None:
    assert signals([a_row("a", TODAY - 30 * DAY, found=True), a_row("b", TODAY, found=True)]) == []


@pytest.mark.parametrize("change", [{"present": False}, {"confidence": "unsure"}, {"pest": "cutworms"}, {"trap": "t1"}])
def test_what_is_no_find(change: dict[str, Any]) -> None:
    assert signals([a_row("a", TODAY, found=True, **change)]) == []


def test_last_season_is_another_season() -> None:
    last = a_row("old", date(2026, 2, 10), found=True)  # before 15 February
    (found,) = signals([last, a_row("a", TODAY, found=True)])
    assert found.figures["day"] == TODAY.isoformat()


# --- what must not change it ---------------------------------------------------------------------


def test_nothing_later_is_peeked_at() -> None:
    rows = past(2021, 2022, 2023, 2024) + now()
    before = evaluate(known(observations=rows), BOOK)
    late = NOW + timedelta(seconds=1)
    flipped = [
        replace(row, version=2, present=not row.present, day=row.day - 7 * DAY, knowable_from=late) for row in rows
    ]
    appended = [a_row(f"new:{i}", TODAY - 20 * DAY, found=True, knowable_from=late) for i in range(5)]
    assert [each.kind for each in before] == ["first_seen"]
    assert evaluate(known(observations=[*rows, *flipped, *appended]), BOOK) == before


def test_reports_sent_twice_make_no_new_claim() -> None:
    rows = past(2021, 2022, 2023, 2024) + now()
    again = [replace(row, key=f"again:{row.key}") for row in rows]
    (once,), (twice,) = signals(rows), signals([*rows, *again])
    assert once.figures == twice.figures


def test_fewer_past_looks_never_make_it_more_certain() -> None:
    full, thin = past(2021, 2022, 2023, 2024), past(2021, 2022, 2023, 2024)[::4]
    assert signals([*thin, *now()])[0].figures["chance"] >= signals([*full, *now()])[0].figures["chance"]


def test_moved_500_km_it_says_the_same() -> None:
    there = place(LAT + 4.5, LON)  # 4.5° of latitude are 500 km
    (moved,) = signals([a_row("a", TODAY, found=True, place=there)], district=a_district(latitude=LAT + 4.5))
    (here,) = signals([a_row("a", TODAY, found=True)])
    assert {**moved.figures, "cell": None} == {**here.figures, "cell": None}
    assert moved.cells == (there.cell,)


def test_looks_that_can_show_nothing_are_no_effort() -> None:
    """A look of another pest, or of a day to come, is no look for this one."""
    others = [a_row(f"o{i}", TODAY - DAY, found=False, pest="cutworms", reporter=f"r{i}") for i in range(5)]
    to_come = a_row("t", TODAY + 2 * DAY, found=False, knowable_from=NOW)
    (found,) = signals([a_row("a", TODAY, found=True), *others, to_come])
    assert found.figures["looks"] == 1


def test_past_damage_looks_do_not_make_a_routine_find_usual() -> None:
    """Looks prompted by damage find it early; routine looks are held against routine looks first."""
    prompted = [
        a_row(f"d{year}:{i}", date(year, 3, 1) + 7 * i * DAY, found=True, why=Why.DAMAGE, reporter="olive")
        for year in (2021, 2022, 2023, 2024)
        for i in range(10)
    ]
    routine = [*past(2021, 2022, 2023, 2024), *prompted, *now()]
    prompted_now = [replace(row, why=Why.DAMAGE) if row.day.year == 2026 else row for row in routine]
    assert signals(routine)[0].figures["chance"] < signals(prompted_now)[0].figures["chance"]
