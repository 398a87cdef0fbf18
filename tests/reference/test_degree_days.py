"""Degree-days against numerical integration (scipy) on a real daily series (vega-datasets, seattle-weather).

The reference integrates the day's sine curve between its thresholds and knows nothing of the closed form.
Season totals: integrated once with scipy 1.17.1, on the package's 1,461 days (2012 to 2015, no gaps).
"""

import warnings
from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import quad

from rules import degree_days

with warnings.catch_warnings():
    warnings.simplefilter("ignore")  # the package warns about its own pandas options
    from vega_datasets import data

    SEATTLE = data.seattle_weather()

TOTALS = {  # year: (base 10, base 10 upper 30, base 5 upper 25)
    2012: (1201.702172, 1198.004976, 2425.101087),
    2013: (1436.255659, 1433.503303, 2718.002327),
    2014: (1559.743130, 1555.329933, 2925.118538),
    2015: (1616.109829, 1606.936316, 2981.005743),
}
FIRST_DAYS_2014 = {50: "04-06", 100: "04-30", 200: "05-19", 400: "06-22"}


def integrated(tmin: float, tmax: float, lower: float, upper: float | None) -> float:
    """Degree-days of one day by integration over half a sine period, split where the curve crosses a threshold."""
    mean, half = (tmin + tmax) / 2, (tmax - tmin) / 2
    bounds = [lower] if upper is None else [lower, upper]
    inside = [(bound - mean) / half for bound in bounds if half and abs(bound - mean) < half]
    kinks = sorted(float(np.arcsin(x)) for x in inside)

    def above(angle: float) -> float:
        t = mean + half * np.sin(angle)
        return max(0.0, min(t, np.inf if upper is None else upper) - lower)

    edges = [-np.pi / 2, *kinks, np.pi / 2]
    return sum(quad(above, a, b, epsabs=1e-12)[0] for a, b in pairwise(edges)) / np.pi


@pytest.mark.parametrize(("lower", "upper"), [(10.0, None), (10.0, 30.0), (5.0, 25.0)])
def test_every_day_of_the_real_series_equals_its_integral(lower: float, upper: float | None) -> None:
    tmin, tmax = SEATTLE.temp_min.to_numpy(), SEATTLE.temp_max.to_numpy()
    ours = degree_days.single_sine(tmin, tmax, lower, upper)
    theirs = [integrated(low, high, lower, upper) for low, high in zip(tmin, tmax, strict=True)]
    np.testing.assert_allclose(ours, theirs, atol=1e-9)


@pytest.mark.parametrize("year", TOTALS)
def test_year_totals(year: int) -> None:
    rows = SEATTLE[SEATTLE.date.dt.year == year]
    tmin, tmax = rows.temp_min.to_numpy(), rows.temp_max.to_numpy()
    for (lower, upper), expected in zip(((10, None), (10, 30), (5, 25)), TOTALS[year], strict=True):
        assert degree_days.single_sine(tmin, tmax, lower, upper).sum() == pytest.approx(expected, abs=1e-5)


def test_first_days_at_which_a_sum_is_reached_in_2014() -> None:
    rows = SEATTLE[SEATTLE.date.dt.year == 2014]
    total = degree_days.single_sine(rows.temp_min.to_numpy(), rows.temp_max.to_numpy(), 10).cumsum()
    for needed, expected in FIRST_DAYS_2014.items():
        assert rows.date.iloc[int(np.argmax(total >= needed))].strftime("%m-%d") == expected


@pytest.mark.parametrize(
    ("tmin", "tmax", "lower", "upper", "expected"),
    [
        # integrated with scipy.integrate.quad, cut at the kinks; the round ones also follow by symmetry
        (5, 20, 10, None, 3.77122441),
        (2, 9, 10, None, 0),
        (12, 28, 10, None, 10),
        (5, 35, 10, 30, 10.0),
        (12, 35, 10, 30, 12.487397126),
        (31, 38, 10, 30, 20),
        (10, 30, 10, 30, 10),
        (-3, 14.5, 6.5, 28, 2.420449171),
        (0, 10, 5, None, 5 / np.pi),
        (8, 22, 10, None, 5.3256),
        (6, 36, 10, 30, 10.4653),
        (5, 21, 6.3, 32.5, 6.8586),
    ],
)
def test_single_days(tmin: float, tmax: float, lower: float, upper: float | None, expected: float) -> None:
    assert float(degree_days.single_sine(tmin, tmax, lower, upper)) == pytest.approx(expected, abs=5e-5)


@pytest.mark.parametrize(("tmin", "tmax"), [(5.0, 35.0), (12.0, 28.0), (2.0, 12.0), (31.0, 38.0), (8.0, 8.0)])
def test_the_triangle_equals_its_own_area(tmin: float, tmax: float) -> None:
    """The single triangle rises and falls in straight lines: average a million points of one rising side."""
    side = np.linspace(tmin, tmax, 1_000_001)
    area = float(np.mean(np.clip(np.minimum(side, 30.0) - 10.0, 0, None)))
    assert float(degree_days.triangle(tmin, tmax, 10, 30)) == pytest.approx(area, abs=1e-4)


def test_a_missing_day_stays_missing() -> None:
    assert np.isnan(degree_days.single_sine(np.nan, 20.0, 10.0))
    assert np.isnan(degree_days.single_sine(5.0, np.nan, 10.0, 30.0))


def test_impossible_days_are_refused() -> None:
    with pytest.raises(ValueError, match="tmin"):
        degree_days.single_sine(20.0, 10.0, 5.0)
    with pytest.raises(ValueError, match="upper"):
        degree_days.single_sine(5.0, 10.0, 10.0, 10.0)
