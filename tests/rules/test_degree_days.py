"""Degree-days: worked days, what must always hold, and sums with missing days."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rules import degree_days

NAN = np.nan
temperature = st.floats(-15, 45, allow_nan=False)


# Closed form of Baskerville and Emin (Ecology 50:514-517, 1969), each checked by numerical integration.
@pytest.mark.parametrize(
    ("tmin", "tmax", "lower", "upper", "expected"),
    [
        (15, 25, 10, None, 10.0),
        (5, 9, 10, None, 0.0),
        (0, 10, 5, None, 5 / np.pi),
        (8, 22, 10, None, 5.3256),
        (5, 20, 10, None, 3.7712),
        (10, 30, 10, 30, 10.0),
        (12, 34, 10, 30, 12.2621),
        (6, 36, 10, 30, 10.4653),
        (32, 38, 10, 30, 20.0),
        (5, 21, 6.3, 32.5, 6.8586),
    ],
)
def test_single_sine_worked_days(tmin, tmax, lower, upper, expected):
    assert degree_days.single_sine(tmin, tmax, lower, upper) == pytest.approx(expected, abs=5e-5)


# By hand: the part of a triangle above the threshold is (tmax - T)² / (2 (tmax - tmin)).
@pytest.mark.parametrize(
    ("tmin", "tmax", "lower", "upper", "expected"),
    [
        (0, 10, 5, None, 25 / 20),
        (5, 20, 10, None, 100 / 30),
        (15, 25, 10, None, 10.0),
        (5, 9, 10, None, 0.0),
        (5, 35, 10, 30, 625 / 60 - 25 / 60),
        (31, 38, 10, 30, 20.0),
    ],
)
def test_triangle_worked_days(tmin, tmax, lower, upper, expected):
    assert degree_days.triangle(tmin, tmax, lower, upper) == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize("method", [degree_days.single_sine, degree_days.triangle])
class TestBoth:
    @pytest.mark.parametrize(("at", "expected"), [(8, 0), (10, 0), (17, 7), (30, 20), (33, 20)])
    def test_a_day_without_swing_is_its_mean(self, method, at, expected):
        assert method(at, at, 10, 30) == pytest.approx(expected)

    def test_missing_extremes_are_missing_days(self, method):
        got = method([NAN, 5, 12, NAN], [20, NAN, 20, NAN], 10, 30)
        np.testing.assert_array_equal(np.isnan(got), [True, True, False, True])

    def test_shapes_broadcast(self, method):
        assert method(np.zeros((3, 1)), np.full(4, 20.0), 10).shape == (3, 4)

    def test_impossible_input_is_refused(self, method):
        with pytest.raises(ValueError, match="tmin is above tmax"):
            method([5, 21], [20, 20], 10)
        with pytest.raises(ValueError, match=r"upper \(10\) must be above lower \(10\)"):
            method(5, 20, 10, 10)

    @given(a=temperature, b=temperature, lower=st.floats(0, 15), span=st.floats(1, 25), warmer=st.floats(0, 5))
    def test_always(self, method, a, b, lower, span, warmer):
        tmin, tmax, upper = min(a, b), max(a, b), lower + span
        got = method(tmin, tmax, lower, upper)
        assert 0 <= got <= span + 1e-9
        assert got <= method(tmin, tmax, lower) + 1e-9
        assert got <= method(tmin + warmer, tmax + warmer, lower, upper) + 1e-9


# --- sums --------------------------------------------------------------------------------------


def test_accumulate_without_gaps_is_the_sum():
    got = degree_days.accumulate([1.0, 2, 3, 4], 1, 0, 9)
    np.testing.assert_array_equal(got.low, [0, 2, 5, 9])
    np.testing.assert_array_equal(got.high, got.low)
    assert not got.filled.any()
    assert not got.missing.any()


def test_accumulate_fills_two_days_in_a_straight_line():
    # by hand: 2, (4, 6), 8
    got = degree_days.accumulate([2, NAN, NAN, 8], 0, 0, 9)
    np.testing.assert_allclose(got.low, [2, 6, 12, 20])
    np.testing.assert_allclose(got.high, got.low)
    np.testing.assert_array_equal(got.filled, [False, True, True, False])


def test_accumulate_makes_a_long_gap_an_interval():
    # by hand: three days of 1 to 5, then 8
    got = degree_days.accumulate([2, NAN, NAN, NAN, 8], 0, 1, [5] * 5)
    np.testing.assert_allclose(got.low, [2, 3, 4, 5, 13])
    np.testing.assert_allclose(got.high, [2, 7, 12, 17, 25])
    np.testing.assert_array_equal(got.missing, [False, True, True, True, False])


def test_accumulate_fills_the_ends_by_the_one_neighbour():
    got = degree_days.accumulate([NAN, 3, NAN, NAN], 0, 0, 9)
    np.testing.assert_allclose(got.low, [3, 6, 9, 12])


def test_accumulate_works_cells_apart_and_knows_nothing_from_nothing():
    dd = np.array([[1.0, NAN], [NAN, NAN], [3.0, NAN]])
    got = degree_days.accumulate(dd, 0, 0, 10)
    np.testing.assert_allclose(got.low, [[1, 0], [3, 0], [6, 0]])
    np.testing.assert_allclose(got.high, [[1, 10], [3, 20], [6, 30]])


def test_accumulate_refuses_a_gap_without_bounds():
    with pytest.raises(ValueError, match="low and high must be given"):
        degree_days.accumulate([1, NAN, NAN, NAN], 0, [1, 1, NAN, 1], 5)
    with pytest.raises(ValueError, match="low and high must be given"):
        degree_days.accumulate([1, NAN, NAN, NAN], 0, 6, 5)
    with pytest.raises(ValueError, match="start is 4"):
        degree_days.accumulate([1.0, 2, 3, 4], 4, 0, 5)


@given(st.lists(st.floats(0, 15), min_size=4, max_size=20), st.data())
def test_losing_days_never_narrows_the_sum_past_its_gap(values, data):
    # within bounds that hold each day's true value, a long gap's interval holds the true sum
    gap = data.draw(st.integers(0, len(values) - 4))
    lost = np.array(values)
    lost[gap : gap + 3] = NAN
    low, high = np.min(values), np.max(values)
    got = degree_days.accumulate(lost, 0, low, high)
    true = np.cumsum(values)
    assert (got.low <= true + 1e-9).all()
    assert (true <= got.high + 1e-9).all()
