"""Intervals over spots, and how much more counting an answer takes."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from rules.sampling import more_spots, spot_interval


def test_worked_interval():
    # by hand: 3 5 4 6 2 has mean 4, variance 2.5, standard error 0.70711; t of 4 d.f. 2.77645 (printed
    # tables: 2.776): 4 ± 1.96324; per ten plants a spot, a tenth of it
    found = spot_interval([3, 5, 4, 6, 2], 10)
    assert (found.mean, found.low, found.high) == pytest.approx((0.4, 0.203676, 0.596324), abs=1e-6)
    assert found.spots == 5


@given(st.lists(st.integers(0, 60), min_size=2, max_size=20).filter(lambda v: len(set(v)) > 1))
def test_interval_is_students_t(counts):
    low, high = stats.t.interval(0.95, len(counts) - 1, np.mean(counts), stats.sem(counts))
    found = spot_interval(counts)
    assert (found.low, found.high) == pytest.approx((max(low, 0), high))


def test_equal_spots_do_not_claim_certainty():
    # by hand: nothing at five spots of 20 plants: standard error 1/100, t 2.77645
    found = spot_interval([0] * 5, 20)
    assert (found.mean, found.low, found.high) == pytest.approx((0, 0, 0.0277645), abs=1e-7)
    # four in each of four spots: standard error of the sum 4, of the mean 1; t of 3 d.f. 3.18245
    found = spot_interval([4] * 4)
    assert (found.low, found.high) == pytest.approx((0.81755, 7.18245), abs=1e-5)


@pytest.mark.parametrize("counts", [[], [12]])
def test_less_than_two_spots_have_no_interval(counts):
    assert spot_interval(counts, 10) is None


def test_impossible_counts_are_refused():
    with pytest.raises(ValueError, match="0 or more"):
        spot_interval([1, -1])
    with pytest.raises(ValueError, match="0 or more"):
        spot_interval([1, np.nan])
    with pytest.raises(ValueError, match="units_per_spot is 0"):
        spot_interval([1, 2], 0)


def test_more_spots_worked():
    # by hand: five spots with standard deviation 2: half width 2.77645 x 2 / √5 = 2.48333. To come under 2:
    # n = 6: 2.57058 x 2 / √6 = 2.0989; n = 7: 2.44691 x 2 / √7 = 1.8497, so two more
    assert more_spots(2.48333, 2.0, 5) == 2


@given(st.floats(0.1, 50), st.floats(0.01, 50), st.integers(2, 20))
def test_more_spots_is_the_least_that_does(half, margin, spots):
    found = more_spots(half, margin, spots)
    spread = half * np.sqrt(spots) / stats.t.ppf(0.975, spots - 1)

    def half_at(n):
        return stats.t.ppf(0.975, n - 1) * spread / np.sqrt(n)

    if found is None:
        assert half_at(40) >= margin * (1 - 1e-9)
        return
    assert half_at(spots + found) < margin * (1 + 1e-9)
    assert found == 1 or half_at(spots + found - 1) >= margin * (1 - 1e-9)
