"""Counts against the number that matters: worked intervals, units, stages, and what is never compared."""

from collections.abc import Sequence
from dataclasses import replace
from datetime import date, timedelta
from typing import Any

import pytest

from rules.digests import digest
from rules.records import Ask, Observation, Paddock, Signal
from service.places import place
from service.rulebook import load
from service.signals import evaluate, threshold
from tests.builders import LAT, LON, NOW, TODAY, a_district, a_paddock, an_observation
from tests.known import known

BOOK = load()
DAY = timedelta(days=1)
MANY = (120.0, 150.0, 140.0, 160.0, 130.0)  # mites at five spots of ten plants
ABOUT = (90.0, 120.0, 110.0, 130.0, 100.0)
FEW = (20.0, 50.0, 40.0, 60.0, 30.0)


def a_count(key: str = "csv:1", spots: Sequence[float] = MANY, **changes: Any) -> Observation:
    """Mites counted by spots in canola at one true leaf."""
    values: dict[str, Any] = {
        "paddock": "p1",
        "crop": "canola",
        "stage": 11,
        "unit": "per_plant",
        "spot_counts": tuple(spots),
        "units_per_spot": 10,
        "units_sampled": 10 * len(spots),
        "count": sum(spots) / (10 * len(spots)) if spots else None,
    }
    return an_observation(key, **(values | changes))


def worms(**changes: Any) -> Observation:
    """Cutworms in ten half metres of row: 1.5 each on average."""
    values: dict[str, Any] = {
        "spots": (1.0, 2.0) * 5,
        "pest": "cutworms",
        "unit": "per_half_metre_row",
        "units_per_spot": 1,
        "units_sampled": 10,
        "count": 1.5,
    }
    return a_count(**(values | changes))


def signals(*rows: Observation, paddocks: Sequence[Paddock] = (), **changes: Any) -> list[Signal]:
    pest = rows[0].pest
    rule = next(rule for rule in BOOK.rules if rule.id == f"{pest}_threshold")
    fields = list(paddocks) or [a_paddock(crop="canola")]
    return threshold.evaluate(known(observations=rows, paddocks=fields, **changes), rule, BOOK.pests[pest])


# --- what is said --------------------------------------------------------------------------------


def test_a_count_above_the_number() -> None:
    (found,) = signals(a_count())
    # by hand: spot means 12, 15, 14, 16, 13; mean 14, standard error √2.5 / √5 = 0.7071,
    # t(4 degrees of freedom, 97.5 %) = 2.7764, so 14 ± 1.963
    assert found.figures == {
        "day": TODAY.isoformat(),
        "mean": 14.0,
        "low": pytest.approx(12.04, abs=0.005),
        "high": pytest.approx(15.96, abs=0.005),
        "unit": "per_plant",
        "threshold_low": 10.0,
        "threshold_high": 10.0,
        "verdict": "at_or_above",
        "spots": 5,
        "more_spots": None,
        "crop": "canola",
        "stage": 11,
        "mark": "S",
        "source": "Challenges in devising economic spray thresholds, Pest Manag Sci 2015, doi 10.1002/ps.3952",
        "edge_mean": None,
        "middle_mean": None,
    }
    assert (found.kind, found.ask, found.paddock, found.cells) == (
        "threshold",
        Ask.COUNT,
        "p1",
        (a_paddock().place.cell,),
    )
    assert (found.first_day, found.last_day) == (TODAY, TODAY + 7 * DAY)


def test_it_rests_on_the_count_and_the_paddock() -> None:
    row = a_count()
    (found,) = signals(row)
    assert [(each.table, each.id, each.version, each.digest) for each in found.evidence] == [
        ("observation", "csv:1", 1, row.digest),
        ("paddock", "p1", 0, digest(a_paddock(crop="canola"))),
    ]


def test_near_the_number_more_spots_are_asked_for() -> None:
    (found,) = signals(a_count(spots=ABOUT))
    assert (found.figures["verdict"], found.ask) == ("near", Ask.COUNT)
    # by hand: 11 ± 1.963 holds 10; the spread of 1.5811 a spot is within 1 of the mean at 13 spots
    # (2.1788 × 1.5811 / √13 = 0.955) and not at 12 (2.2010 × 1.5811 / √12 = 1.005), so 8 more
    assert found.figures["more_spots"] == 8


def test_below_the_number_nothing_is_asked() -> None:
    assert signals(a_count(spots=FEW)) == []


def test_edge_and_middle_are_counted_apart() -> None:
    (found,) = signals(a_count(spot_at=("edge", "edge", "middle", "middle", "middle")))
    # by hand: (12 + 15) / 2, and (14 + 16 + 13) / 3
    assert (found.figures["edge_mean"], found.figures["middle_mean"]) == (13.5, pytest.approx(14.33, abs=0.005))


def test_two_larvae_in_half_a_metre_of_row_in_cereals() -> None:
    (found,) = signals(worms(crop="wheat", stage=12, spots=(3.0, 2.0) * 5, count=2.5))
    # by hand: mean 2.5, standard error 0.527 / √10 = 0.1667, t(9) = 2.2622: 2.5 ± 0.377
    assert (found.figures["verdict"], found.figures["mark"]) == ("at_or_above", "C")
    assert (found.figures["low"], found.figures["unit"]) == (pytest.approx(2.12, abs=0.005), "per_half_metre_row")


def test_a_count_in_rows_is_brought_to_square_metres_by_the_row_spacing() -> None:
    (found,) = signals(worms(row_spacing_m=0.25))
    # by hand: 1.5 larvae in 0.5 m × 0.25 m are 12 in a square metre
    assert (found.figures["mean"], found.figures["unit"]) == (12.0, "per_m2")
    assert (found.figures["threshold_low"], found.figures["threshold_high"]) == (2.0, 3.0)


def test_where_two_numbers_are_in_use_the_count_is_set_against_both() -> None:
    """Cereals: 2 in half a metre of row, or 2 to 3 in a square metre; both common practice."""
    wheat: dict[str, Any] = {"crop": "wheat", "stage": 12, "row_spacing_m": 0.25}
    (found,) = signals(worms(spots=(1.0, 0.0) * 5, count=0.5, **wheat))
    # by hand: half a metre at 0.25 m is 0.125 m2, so 2 in a square metre are 0.25 in it
    assert (found.figures["threshold_low"], found.figures["threshold_high"]) == (0.25, 2.0)
    assert (found.figures["verdict"], found.figures["more_spots"]) == ("near", None)
    (over,) = signals(worms(spots=(3.0, 2.0) * 5, count=2.5, **wheat))
    assert over.figures["verdict"] == "at_or_above"
    assert signals(worms(spots=(0.0,) * 9 + (0.1,), count=0.01, **wheat)) == []


def test_the_row_spacing_may_be_the_paddocks() -> None:
    field = a_paddock(crop="canola", row_spacing_m=0.25)
    assert signals(worms(), paddocks=[field])[0].figures["mean"] == 12.0


# --- one number without its spots ------------------------------------------------------------------


@pytest.mark.parametrize("spots", [(), (400.0,)], ids=["no spots", "one spot has no spread"])
@pytest.mark.parametrize("mean", [0.1, 10.0, 40.0])
def test_one_number_is_never_called(spots: tuple[float, ...], mean: float) -> None:
    """It has no interval: whether it lies below, near or above 10 a plant, the answer is to count by spots."""
    (found,) = signals(a_count(spots=spots, count=mean))
    assert (found.figures["verdict"], found.ask, found.paddock) == ("count_by_spots", Ask.COUNT, "p1")
    assert (found.figures["mean"], found.figures["threshold_low"], found.figures["threshold_high"]) == (mean, 10, 10)
    said = {"low", "high", "spots", "more_spots", "edge_mean", "middle_mean"}
    assert {name: found.figures[name] for name in said} == dict.fromkeys(said)
    assert [each.id for each in found.evidence] == ["csv:1", "p1"]


def test_one_number_is_brought_to_the_numbers_unit() -> None:
    (found,) = signals(worms(spots=(), row_spacing_m=0.25))
    # by hand: 1.5 larvae in 0.5 m × 0.25 m are 12 in a square metre
    assert (found.figures["mean"], found.figures["unit"]) == (12.0, "per_m2")


@pytest.mark.parametrize(
    ("why", "change"),
    [
        ("not surely this pest", {"confidence": "unsure"}),
        ("eight days old", {"day": TODAY - 8 * DAY}),
        ("no number at two true leaves", {"stage": 12}),
        ("holes in leaves are not mites", {"unit": "holes_per_leaf"}),
        ("stage unknown", {"stage": None}),
    ],
)
def test_one_number_is_answered_only_where_spots_would_be(why: str, change: dict[str, Any]) -> None:
    assert signals(a_count(spots=(), count=40.0, **change)) == [], why


@pytest.mark.parametrize(
    ("spots", "days_later", "verdict"),
    [
        (FEW, 1, "count_by_spots"),  # the older count was below; what grew since has no interval
        (FEW, 0, None),
        (FEW, -1, None),
        (MANY, 1, "at_or_above"),  # one number takes nothing away from what the spots said
        (MANY, 0, "at_or_above"),
        (ABOUT, 1, "near"),
    ],
)
def test_one_number_beside_a_count_by_spots(spots: Sequence[float], days_later: int, verdict: str | None) -> None:
    by_spots = a_count("csv:1", spots, day=TODAY - 3 * DAY)
    bare = a_count("csv:2", (), count=40.0, day=TODAY - (3 - days_later) * DAY)
    assert [each.figures["verdict"] for each in signals(by_spots, bare)] == ([verdict] if verdict else [])


# --- what is never compared ----------------------------------------------------------------------


@pytest.mark.parametrize(
    ("why", "row"),
    [
        ("not a count at all", a_count(spots=(), count=None)),
        ("nothing counted, so nothing to count again", a_count(spots=(), count=0.0)),
        ("not surely this pest", a_count(confidence="unsure")),
        ("eight days old", a_count(day=TODAY - 8 * DAY)),
        ("no number at two true leaves", a_count(stage=12)),
        ("outside the stages it matters at", a_count(stage=30)),
        # the catalogue has 50 in 100 cm2 of wheat, from memory; these are 70 on average
        ("numbers from memory only", a_count(spots=[5 * n for n in MANY], crop="wheat", unit="per_100cm2")),
        ("holes in leaves are not mites", a_count(unit="holes_per_leaf")),
        ("no row spacing to convert by", worms()),
        ("stage unknown", a_count(stage=None)),
        ("crop unknown to the number", a_count(crop="pasture")),
    ],
)
def test_what_is_not_compared(why: str, row: Observation) -> None:
    assert signals(row) == [], why


def test_seven_days_old_still_counts() -> None:
    assert len(signals(a_count(day=TODAY - 7 * DAY))) == 1


def test_the_newest_count_of_a_paddock_decides() -> None:
    older, newer = a_count("csv:1", day=TODAY - 2 * DAY), a_count("csv:2", FEW, day=TODAY - DAY)
    assert signals(older, newer) == []
    assert len(signals(replace(newer, day=TODAY - 3 * DAY), older)) == 1


def test_the_stage_may_be_reported_by_another_row() -> None:
    report = an_observation("csv:9", paddock="p1", crop="canola", stage=11, day=TODAY - 3 * DAY, pest="lucerne_flea")
    (found,) = signals(a_count(stage=None), report)
    assert found.figures["stage"] == 11
    assert [each.id for each in found.evidence] == ["csv:1", "csv:9", "p1"]


def test_paddocks_are_called_one_by_one() -> None:
    fields = [a_paddock("p2", crop="canola"), a_paddock("p1", crop="canola")]
    found = signals(a_count("csv:1", paddock="p2"), a_count("csv:2", paddock="p1"), paddocks=fields)
    assert [each.paddock for each in found] == ["p1", "p2"]


# --- what must not change it ---------------------------------------------------------------------


def test_nothing_later_is_peeked_at() -> None:
    row = a_count()
    fields = [a_paddock(crop="canola")]
    before = evaluate(known(observations=[row], paddocks=fields), BOOK)
    late = NOW + timedelta(seconds=1)
    altered = replace(row, version=2, spot_counts=FEW, digest="later", knowable_from=late)
    appended = a_count("csv:2", FEW, knowable_from=late)
    assert sorted(each.kind for each in before) == ["first_seen", "threshold"]
    assert evaluate(known(observations=[row, altered, appended], paddocks=fields), BOOK) == before


def test_a_report_sent_twice_makes_no_new_claim() -> None:
    (once,), (twice,) = signals(a_count()), signals(a_count(), a_count("csv:2"))
    assert (once.figures, once.ask, once.paddock) == (twice.figures, twice.ask, twice.paddock)


def test_moved_500_km_it_says_the_same() -> None:
    there = place(LAT + 4.5, LON)  # 4.5° of latitude are 500 km
    moved = signals(
        a_count(place=there),
        paddocks=[a_paddock(crop="canola", place=there)],
        district=a_district(latitude=LAT + 4.5),
    )
    assert [each.figures for each in moved] == [each.figures for each in signals(a_count())]


def test_a_count_of_tomorrow_is_not_known_today() -> None:
    assert signals(a_count(day=date(2026, 5, 13))) == []
