"""The Wilson interval against known values."""

import pytest

from rules.proportions import wilson


def test_three_of_forty() -> None:
    # 2.58 to 19.86 %: the standard formula, worked out apart from this code.
    low, high = wilson(3, 40)
    assert (round(100 * low, 2), round(100 * high, 2)) == (2.58, 19.86)


def test_ends_of_the_scale() -> None:
    # By hand: for 0 of n the upper end is z²/(n + z²); 20 looks: 3.8415/23.8415 = 0.1611.
    assert wilson(0, 20) == (0.0, pytest.approx(0.1611, abs=5e-5))
    assert wilson(20, 20) == (pytest.approx(1 - 0.1611, abs=5e-5), 1.0)
    assert wilson(0, 0) == (0.0, 1.0)


def test_more_found_than_looked_is_refused() -> None:
    with pytest.raises(ValueError, match="5 of 4"):
        wilson(5, 4)
