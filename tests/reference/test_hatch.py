"""Hatch rules against brute force from the published wording alone, and against worked examples.

The published form (Exp. Appl. Acarol. 65:259-276, 2015, doi 10.1007/s10493-014-9876-x): after 1 March, the
first day with more than 5 mm of rain; then the first day that ends ten days with a mean temperature below
20.5 °C (western type) or 16 °C (south-eastern type). The other form, "16 to 20 °C for several days and
about 5 mm of rain", is common practice and has no source.
"""

import numpy as np
import numpy.typing as npt
import pytest

from rules import hatch

Series = npt.NDArray[np.float64]


def brute_published(
    tmean: Series, rain: Series, more: float, over: int, below: float, days: int, start: int, consecutive: bool
) -> int:
    """One cell, day by day, in the words of the rule."""
    for wet in range(start, len(rain)):
        if wet - over + 1 >= 0 and rain[wet - over + 1 : wet + 1].sum() > more:
            break
    else:
        return -1
    for last in range(wet + days, len(tmean)):
        window = tmean[last - days + 1 : last + 1]
        if np.isnan(window).any():
            continue
        if (window < below).all() if consecutive else window.mean() < below:
            return last
    return -1


def brute_common(
    tmean: Series, rain: Series, at_most: float, days: int, at_least: float, within: int, start: int
) -> int:
    for day in range(start, len(tmean)):
        if day - days + 1 < 0 or day - within + 1 < 0:
            continue
        cool, wet = tmean[day - days + 1 : day + 1], rain[day - within + 1 : day + 1]
        if np.isnan(cool).any() or np.isnan(wet).any():
            continue
        if (cool <= at_most).all() and (wet >= at_least).any():
            return day
    return -1


def some_weather(seed: int, cells: int = 40, missing: float = 0.0) -> tuple[Series, Series]:
    """Random autumns in multiples of an eighth, so that sums are exact in every float."""
    random = np.random.default_rng(seed)
    season = np.linspace(22, 13, 110)[:, None] + np.round(random.normal(0, 3, (110, cells)) * 8) / 8
    tmean = np.round(season * 8) / 8
    rain = np.where(random.random((110, cells)) < 0.12, np.round(random.gamma(1.2, 5, (110, cells)) * 8) / 8, 0.0)
    for values in (tmean, rain):
        values[random.random(values.shape) < missing] = np.nan
    return tmean, rain


@pytest.mark.parametrize("consecutive", [True, False])
@pytest.mark.parametrize(("over", "below", "days"), [(1, 16.0, 10), (5, 20.5, 10), (3, 18.0, 4)])
@pytest.mark.parametrize("missing", [0.0, 0.02])
def test_the_published_form_equals_brute_force(
    over: int, below: float, days: int, missing: float, consecutive: bool
) -> None:
    tmean, rain = some_weather(over * 7 + days, missing=missing)
    ours = hatch.rain_then_cool(
        tmean,
        rain,
        rain_more_than=5.0,
        rain_days=over,
        cool_below=below,
        cool_days=days,
        consecutive=consecutive,
        start=12,
    )
    theirs = [
        brute_published(tmean[:, i], rain[:, i], 5.0, over, below, days, 12, consecutive) for i in range(tmean.shape[1])
    ]
    assert ours.tolist() == theirs
    assert len(set(theirs)) > 3, "the example is too easy to tell anything apart"


@pytest.mark.parametrize("missing", [0.0, 0.02])
def test_the_common_form_equals_brute_force(missing: float) -> None:
    tmean, rain = some_weather(99, missing=missing)
    ours = hatch.first_day(tmean, rain, cool_at_most=20, cool_days=7, rain_at_least=5, rain_within=7, start=9)
    theirs = [brute_common(tmean[:, i], rain[:, i], 20, 7, 5, 7, 9) for i in range(tmean.shape[1])]
    assert ours.tolist() == theirs
    assert len(set(theirs)) > 3


# --- worked by hand: rain 6.0 mm on 1 April, day 0 is 1 March, so 1 April is day 31 --------------------------


def april(cool: dict[range, float], *, rain_mm: float = 6.0) -> tuple[Series, Series]:
    """Ninety days of 25 °C with the spells that are named (in days of April), and one day of rain."""
    tmean, rain = np.full((90, 1), 25.0), np.zeros((90, 1))
    for days, value in cool.items():
        for day in days:
            tmean[30 + day] = value
    rain[31] = rain_mm
    return tmean, rain


WESTERN, SOUTH_EASTERN = 20.5, 16.0
MILD = {range(1, 2): 15.0, range(2, 12): 18.0, range(12, 60): 15.0}
BROKEN = {range(1, 10): 15.0, range(10, 11): 20.6, range(11, 60): 15.0}


def published(weather: tuple[Series, Series], below: float) -> int:
    found = hatch.rain_then_cool(*weather, rain_more_than=5.0, rain_days=5, cool_below=below, cool_days=10)
    return int(found[0])


def test_western_type_is_met_on_11_april() -> None:
    assert published(april(MILD), WESTERN) == 30 + 11


def test_south_eastern_type_waits_for_the_cooler_run_until_21_april() -> None:
    assert published(april(MILD), SOUTH_EASTERN) == 30 + 21


def test_one_warm_day_breaks_the_run_until_20_april() -> None:
    assert published(april(BROKEN), WESTERN) == 30 + 20


def test_five_millimetres_exactly_is_not_more_than_five() -> None:
    assert published(april(MILD, rain_mm=5.0), WESTERN) == -1


def test_common_practice_16_to_20_degrees_for_several_days_and_about_5_mm() -> None:
    """Common practice, no source: a week at 18 °C with 5 mm in it is met on its seventh day."""
    tmean, rain = np.full((40, 1), 25.0), np.zeros((40, 1))
    tmean[20:] = 18.0
    rain[22] = 5.0
    found = hatch.first_day(tmean, rain, cool_at_most=20, cool_days=7, rain_at_least=5, rain_within=7)
    assert int(found[0]) == 26


def test_bounds_hold_the_truth_whatever_the_missing_days_were() -> None:
    tmean, rain = some_weather(5, cells=60)
    shape = {"rain_more_than": 5.0, "rain_days": 1, "cool_below": 17.0, "cool_days": 5}
    truth = hatch.rain_then_cool(tmean, rain, **shape)
    random = np.random.default_rng(6)
    hidden_t, hidden_r = tmean.copy(), rain.copy()
    hidden_t[random.random(tmean.shape) < 0.05] = np.nan
    hidden_r[random.random(rain.shape) < 0.05] = np.nan
    earliest, latest = hatch.bounds(hidden_t, hidden_r, **shape)
    never = len(tmean)
    before, between, after = (np.where(days < 0, never, days) for days in (earliest, truth, latest))
    assert (before <= between).all()
    assert (between <= after).all()
    assert (before < after).any()
