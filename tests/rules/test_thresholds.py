"""Counts against the number that matters, and units."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rules.thresholds import Comparison, NotConvertible, compare, convert, spot_interval


@pytest.mark.parametrize(
    ("mean", "interval", "verdict"),
    [
        (4, (2, 7.9), "below"),
        (4, (2, 8), "near"),
        (9, (8, 10), "near"),
        (12, (9.9, 14), "near"),
        (12, (10, 14), "at_or_above"),
        (12, (11, 13), "at_or_above"),
    ],
)
def test_verdicts_against_eight_to_ten(mean, interval, verdict):
    assert compare(mean, interval, 8, 10).verdict == verdict


def test_a_sharp_number_is_reached_at_its_value():
    assert compare(10, (10, 10), 10, 10).verdict == "at_or_above"


def test_no_agreed_number():
    assert compare(100, (90, 110), None, None) == Comparison("no_agreed_number")


@pytest.mark.parametrize("mean", [0, 10, 1000])
def test_a_count_without_spots_is_never_called(mean):
    assert compare(mean, None, 8, 10) == Comparison("count_by_spots")
    assert compare(float("nan"), (1, 2), 8, 10) == Comparison("count_by_spots")


def test_near_says_how_many_more_spots():
    # five spots 6 ± 2.48333 against 8 to 10, two short of it: two more (worked in test_sampling)
    assert compare(6, (6 - 2.48333, 6 + 2.48333), 8, 10, spots=5) == Comparison("near", 2)
    assert compare(12, (12 - 2.48333, 12 + 2.48333), 8, 10, spots=5) == Comparison("near", 2)


def test_a_lower_confidence_asks_for_fewer_spots():
    # by hand, 80 %: 1.53321 x 2 / √5 = 1.37134; to come under 1.2: n = 6: 1.47588 x 2 / √6 = 1.20506;
    # n = 7: 1.43976 x 2 / √7 = 1.08836, so two more
    count = 6.8, (6.8 - 1.37134, 6.8 + 1.37134)
    assert compare(*count, 8, 10, spots=5, confidence=0.8) == Comparison("near", 2)


def test_inside_the_numbers_own_doubt_no_counting_settles_it():
    assert compare(9, (5, 13), 8, 10, spots=5) == Comparison("near", None)


def test_a_hopeless_difference_asks_for_no_number_of_spots():
    assert compare(7.99, (3, 12.98), 8, 10, spots=5) == Comparison("near", None)


def test_mixed_up_ends_are_refused():
    with pytest.raises(ValueError, match="low end"):
        compare(5, (4, 6), 10, 8)
    with pytest.raises(ValueError, match="must lie in its interval"):
        compare(5, (6, 7), 8, 10)


@given(st.lists(st.integers(0, 40), min_size=2, max_size=12), st.floats(0.5, 30), st.floats(0, 5))
def test_a_verdict_never_contradicts_the_mean(counts, low, doubt):
    count = spot_interval(counts)
    got = compare(count.mean, (count.low, count.high), low, low + doubt, spots=count.spots)
    if got.verdict == "below":
        assert count.mean < low
    if got.verdict == "at_or_above":
        assert count.mean >= low + doubt
    assert got.more_spots is None or (got.verdict == "near" and got.more_spots >= 1)


# --- units -------------------------------------------------------------------------------------


# by hand: 10 a plant at 40 plants/m² is 400/m²; 25 cm rows: 4 m of row a square metre; 100 cm² is 0.01 m²
@pytest.mark.parametrize(
    ("value", "unit", "to", "given_", "expected"),
    [
        (10, "per_plant", "per_m2", {"plants_per_m2": 40}, 400),
        (400, "per_m2", "per_plant", {"plants_per_m2": 40}, 10),
        (2, "per_half_metre_row", "per_m2", {"row_spacing_m": 0.25}, 16),
        (4, "per_metre_row", "per_m2", {"row_spacing_m": 0.25}, 16),
        (16, "per_m2", "per_half_metre_row", {"row_spacing_m": 0.25}, 2),
        (2, "per_half_metre_row", "per_metre_row", {"row_spacing_m": 0.25}, 4),
        (3, "per_100cm2", "per_m2", {}, 300),
        (300, "per_m2", "per_100cm2", {}, 3),
        (7, "holes_per_leaf", "holes_per_leaf", {}, 7),
    ],
)
def test_units_that_turn_into_each_other(value, unit, to, given_, expected):
    assert convert(value, unit, to, **given_) == pytest.approx(expected)


@pytest.mark.parametrize("unit", ["per_refuge", "per_trap_night", "per_10_sweeps", "percent_plants", "holes_per_leaf"])
@pytest.mark.parametrize("other", ["per_m2", "per_plant", "per_refuge", "per_10_sweeps"])
def test_units_that_stay_what_they_are(unit, other):
    if unit == other:
        assert convert(1, unit, other) == 1
        return
    for a, b in ((unit, other), (other, unit)):
        with pytest.raises(NotConvertible, match="can't be turned into another unit: "):
            convert(1, a, b, plants_per_m2=40, row_spacing_m=0.25)


def test_a_missing_figure_is_named():
    with pytest.raises(NotConvertible, match="stand count"):
        convert(1, "per_plant", "per_m2")
    with pytest.raises(NotConvertible, match="row spacing"):
        convert(1, "per_m2", "per_metre_row", row_spacing_m=0)
    with pytest.raises(NotConvertible, match="per_acre is not a unit"):
        convert(1, "per_acre", "per_m2")


@given(
    st.floats(0, 1e4),
    st.sampled_from(["per_plant", "per_m2", "per_100cm2", "per_metre_row", "per_half_metre_row"]),
    st.sampled_from(["per_plant", "per_m2", "per_100cm2", "per_metre_row", "per_half_metre_row"]),
)
def test_there_and_back_is_the_same(value, unit, to):
    figures = {"plants_per_m2": 37.0, "row_spacing_m": 0.22}
    assert convert(convert(value, unit, to, **figures), to, unit, **figures) == pytest.approx(value)
