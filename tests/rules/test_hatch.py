"""The hatch rules against hand-worked seasons and the plain form in `plain_hatch`."""

import numba
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import service  # noqa: F401  (points the cache of compiled code at a writable folder)
from rules import hatch
from rules.compiled import BLOCK, STEP
from tests.rules import plain_hatch as plain

MODES = [
    {},
    {"consecutive": False},
    {"rain_again": True},
    {"start": 4},
    {"start": 4, "consecutive": False},
    {"start": 3, "rain_again": True},
    {"rain_days": 1},
    {"cool_days": 1},
    {"rain_days": 60},
    {"cool_days": 60},
    {"start": 99},
]
PUBLISHED = {"rain_more_than": 5.0, "rain_days": 5, "cool_below": 16.0, "cool_days": 4}
PRACTICE = {"cool_at_most": 16.0, "cool_days": 4, "rain_at_least": 5.0, "rain_within": 5}


def a_season(seed: int, days: int = 40, cells: int = 60, dtype=np.float32, missing: float = 0.04):
    """Random weather in tenths, so that sums often fall exactly on a limit; some of it missing."""
    rng = np.random.default_rng(seed)
    tmean = np.round(rng.normal(15.5, 1.5, (days, cells)), 1).astype(dtype)
    rain = np.round(rng.gamma(1, 2, (days, cells)) * (rng.random((days, cells)) < 0.4), 1).astype(dtype)
    tmean[rng.random(tmean.shape) < missing] = np.nan
    rain[rng.random(rain.shape) < missing] = np.nan
    return tmean, rain


def april(rain: dict[int, float], tmean: dict[int, float], days: int = 40):
    """One cell from 1 March on; keys are days of April, temperatures hold until the next key."""
    temperature, wet = np.full((31 + days, 1), 25.0, np.float32), np.zeros((31 + days, 1), np.float32)
    for day, value in sorted(tmean.items()):
        temperature[30 + day :] = value
    for day, value in rain.items():
        wet[30 + day] = value
    return temperature, wet


def day_of_april(index: np.ndarray) -> int:
    return int(index[0]) - 30


# --- a worked season ---------------------------------------------------------------------------
# The rule of Exp Appl Acarol 65:259-276, 2015 (doi 10.1007/s10493-014-9876-x), worked by hand: rain of
# 6.0 mm on 1 April; 15 °C that day, 18 °C on 2-11 April, 15 °C from 12 April on; ten days, > 5 mm.


@pytest.mark.parametrize(("cool_below", "met"), [(20.5, 11), (16.0, 21)], ids=["western", "south-eastern"])
def test_rain_then_cool_worked_season(cool_below, met):
    tmean, rain = april({1: 6.0}, {1: 15.0, 2: 18.0, 12: 15.0})
    found, rain_day = hatch.rain_then_cool(
        tmean, rain, rain_more_than=5.0, rain_days=5, cool_below=cool_below, cool_days=10, return_rain_day=True
    )
    assert (day_of_april(rain_day), day_of_april(found)) == (1, met)


def test_a_cool_run_that_breaks_starts_again():
    # 15 °C on 1-9 April, 20.6 °C on the 10th: the run that began on the 2nd is 8 days long; next 11-20 April
    tmean, rain = april({1: 6.0}, {1: 15.0, 10: 20.6, 11: 15.0})
    found = hatch.rain_then_cool(tmean, rain, rain_more_than=5.0, rain_days=5, cool_below=20.5, cool_days=10)
    assert day_of_april(found) == 20


def test_rain_again_waits_for_rain_after_the_break():
    # the same season with 7 mm on 14 April: run 15-24 April; without that rain, none
    rule = {"rain_more_than": 5.0, "rain_days": 5, "cool_below": 20.5, "cool_days": 10, "rain_again": True}
    tmean, rain = april({1: 6.0, 14: 7.0}, {1: 15.0, 10: 20.6, 11: 15.0})
    assert day_of_april(hatch.rain_then_cool(tmean, rain, **rule)) == 24
    tmean, rain = april({1: 6.0}, {1: 15.0, 10: 20.6, 11: 15.0})
    assert hatch.rain_then_cool(tmean, rain, **rule)[0] == -1


@pytest.mark.parametrize("falls", [{3: 5.0}, {1: 1.6, 4: 3.4}, {1: 1.1, 2: 1.1, 3: 1.4, 5: 1.4}])
@pytest.mark.parametrize("dtype", [np.float32, np.float64])
def test_exactly_the_limit_is_not_more(falls, dtype):
    # 1.6 + 3.4 in float32 is 5.0000002; in millimetres it is 5.0
    tmean, rain = april(falls, {1: 10.0})
    rule = {"rain_days": 5, "cool_below": 20.5, "cool_days": 10, "return_rain_day": True}
    found, rain_day = hatch.rain_then_cool(tmean.astype(dtype), rain.astype(dtype), rain_more_than=5.0, **rule)
    assert (found[0], rain_day[0]) == (-1, -1)
    _, rain_day = hatch.rain_then_cool(tmean.astype(dtype), rain.astype(dtype), rain_more_than=4.99, **rule)
    assert day_of_april(rain_day) == max(falls)


def test_a_mean_may_hold_warm_days():
    # after R on 1 April: 10 and 20 °C in turn, mean 15; no two days in a row are below 16
    tmean, rain = april({1: 6.0}, {day: 10.0 if day % 2 else 20.0 for day in range(2, 41)})
    rule = {"rain_more_than": 5.0, "rain_days": 5, "cool_below": 16.0, "cool_days": 4}
    assert hatch.rain_then_cool(tmean, rain, **rule)[0] == -1
    assert day_of_april(hatch.rain_then_cool(tmean, rain, consecutive=False, **rule)) == 5


def test_first_day_worked_season():
    # common practice, by hand: 8 mm on 1 April counts until the 7th; 20.0 °C from the 1st is cool enough,
    # and the seventh such day is the 7th
    tmean, rain = april({1: 8.0}, {1: 20.0})
    assert day_of_april(hatch.first_day(tmean, rain)) == 7
    tmean, rain = april({1: 8.0}, {2: 20.0})
    assert hatch.first_day(tmean, rain)[0] == -1


# --- against the plain form --------------------------------------------------------------------


@pytest.mark.parametrize("dtype", [np.float32, np.float64])
@pytest.mark.parametrize("mode", MODES, ids=str)
def test_rain_then_cool_equals_the_plain_form(mode, dtype):
    tmean, rain = a_season(seed=1, dtype=dtype)
    rule = PUBLISHED | {"cool_below": dtype(16.0)} | mode
    expected = plain.over_cells(plain.rain_then_cool, tmean, rain, **rule)
    found, rain_day = hatch.rain_then_cool(tmean, rain, return_rain_day=True, **rule)
    np.testing.assert_array_equal(np.stack([found, rain_day], 1), expected)
    np.testing.assert_array_equal(hatch.rain_then_cool(tmean, rain, **rule), expected[:, 0])
    assert found.dtype == rain_day.dtype == np.int32


@pytest.mark.parametrize("mode", [{}, {"start": 4}, {"start": 99}, {"rain_within": 1}, {"cool_days": 1}], ids=str)
@pytest.mark.parametrize("dtype", [np.float32, np.float64])
def test_first_day_equals_the_plain_form(mode, dtype):
    tmean, rain = a_season(seed=2, dtype=dtype)
    rule = PRACTICE | mode
    expected = plain.over_cells(plain.first_day, tmean, rain, **rule)
    np.testing.assert_array_equal(hatch.first_day(tmean, rain, **rule), expected)


@settings(max_examples=150, deadline=None)
@given(
    seed=st.integers(0, 2**32 - 1),
    days=st.integers(1, 25),
    rain_days=st.integers(1, 8),
    cool_days=st.integers(1, 6),
    start=st.integers(0, 8),
    missing=st.sampled_from([0.0, 0.05, 0.3]),
    mode=st.sampled_from([{}, {"consecutive": False}, {"rain_again": True}]),
)
def test_both_rules_equal_the_plain_forms(seed, days, rain_days, cool_days, start, missing, mode):
    tmean, rain = a_season(seed, days=days, cells=8, missing=missing)
    rule = {"rain_more_than": 5.0, "rain_days": rain_days, "cool_below": 16.0, "cool_days": cool_days, "start": start}
    expected = plain.over_cells(plain.rain_then_cool, tmean, rain, **rule, **mode)
    np.testing.assert_array_equal(hatch.rain_then_cool(tmean, rain, **rule, **mode), expected[:, 0])
    rule = {"cool_at_most": 16.0, "cool_days": cool_days, "rain_at_least": 5.0, "rain_within": rain_days}
    expected = plain.over_cells(plain.first_day, tmean, rain, start=start, **rule)
    np.testing.assert_array_equal(hatch.first_day(tmean, rain, start=start, **rule), expected)


@pytest.mark.parametrize("cells", [0, 1, STEP - 1, BLOCK, BLOCK + 1, 2 * BLOCK + STEP + 3])
def test_every_block_and_rest_of_a_block_is_worked(cells):
    tmean, rain = a_season(seed=3, days=30, cells=cells)
    for fast in (hatch.first_day(tmean, rain, **PRACTICE), hatch.rain_then_cool(tmean, rain, **PUBLISHED)):
        assert fast.shape == (cells,)
    both = hatch.rain_then_cool(tmean, rain, return_rain_day=True, **PUBLISHED)
    np.testing.assert_array_equal(fast, both[0])
    few = slice(max(cells - 40, 0), None)
    expected = plain.over_cells(plain.first_day, tmean[:, few], rain[:, few], **PRACTICE)
    np.testing.assert_array_equal(hatch.first_day(tmean, rain, **PRACTICE)[few], expected)


# --- what must always hold ---------------------------------------------------------------------


def or_never(day: np.ndarray) -> np.ndarray:
    return np.where(day < 0, 10_000, day)


@settings(max_examples=100, deadline=None)
@given(seed=st.integers(0, 2**32 - 1), mode=st.sampled_from([{}, {"consecutive": False}]))
def test_more_rain_or_cooler_days_never_make_it_later(seed, mode):
    tmean, rain = a_season(seed, days=25, cells=20)
    rng = np.random.default_rng(seed)
    wetter = rain + rng.integers(0, 4, rain.shape).astype(np.float32)
    cooler = tmean - rng.integers(0, 2, tmean.shape).astype(np.float32)
    for rule in (
        lambda t, r: hatch.first_day(t, r, **PRACTICE),
        lambda t, r: hatch.rain_then_cool(t, r, **PUBLISHED, **mode),
    ):
        assert (or_never(rule(tmean, wetter)) <= or_never(rule(tmean, rain))).all()
        assert (or_never(rule(cooler, rain)) <= or_never(rule(tmean, rain))).all()


@settings(max_examples=100, deadline=None)
@given(seed=st.integers(0, 2**32 - 1), mode=st.sampled_from([{}, {"consecutive": False}]))
def test_losing_values_never_makes_a_claim_earlier(seed, mode):
    tmean, rain = a_season(seed, days=25, cells=20, missing=0)
    gappy = [a.copy() for a in (tmean, rain)]
    rng = np.random.default_rng(seed)
    for a in gappy:
        a[rng.random(a.shape) < 0.1] = np.nan
    for rule in (
        lambda t, r: hatch.first_day(t, r, **PRACTICE),
        lambda t, r: hatch.rain_then_cool(t, r, **PUBLISHED, **mode),
    ):
        assert (or_never(rule(*gappy)) >= or_never(rule(tmean, rain))).all()


def test_nothing_known_is_no_claim():
    unknown = np.full((60, 3), np.nan, np.float32)
    for mode in ({}, {"consecutive": False}, {"rain_again": True}):
        assert (hatch.rain_then_cool(unknown, unknown, **PUBLISHED, **mode) == -1).all()
    assert (hatch.first_day(unknown, unknown) == -1).all()


def test_order_of_cells_and_threads_change_nothing():
    tmean, rain = a_season(seed=5, days=30, cells=3 * BLOCK + 5)
    order = np.random.default_rng(5).permutation(tmean.shape[1])
    before = numba.get_num_threads()
    for rule, values in ((hatch.first_day, PRACTICE), (hatch.rain_then_cool, PUBLISHED)):
        whole = rule(tmean, rain, **values)
        np.testing.assert_array_equal(rule(tmean[:, order], rain[:, order], **values), whole[order])
        numba.set_num_threads(1)
        np.testing.assert_array_equal(rule(tmean, rain, **values), whole)
        numba.set_num_threads(before)


def test_what_is_passed_in_stays_as_it_was():
    tmean, rain = a_season(seed=6)
    copies = tmean.copy(), rain.copy()
    hatch.bounds(tmean, rain, **PUBLISHED)
    hatch.first_day(tmean, rain)
    np.testing.assert_array_equal(tmean, copies[0])
    np.testing.assert_array_equal(rain, copies[1])
    assert tmean.flags.writeable


# --- bounds ------------------------------------------------------------------------------------


@settings(max_examples=100, deadline=None)
@given(
    seed=st.integers(0, 2**32 - 1),
    cut=st.integers(0, 6),
    which=st.sampled_from([("practice", {}), ("published", {}), ("published", {"consecutive": False})]),
)
def test_the_true_day_lies_within_the_bounds(seed, cut, which):
    # the truth is worked on the whole season; the bounds see it without its first days and with gaps
    name, mode = which
    rule, values = (hatch.first_day, PRACTICE) if name == "practice" else (hatch.rain_then_cool, PUBLISHED)
    tmean, rain = a_season(seed, days=25, cells=20, missing=0)
    true = rule(tmean, rain, start=cut + 6, **values, **mode)
    rng = np.random.default_rng(seed)
    seen = [np.where(rng.random(a.shape) < 0.1, np.nan, a)[cut:].astype(np.float32) for a in (tmean, rain)]
    earliest, latest = hatch.bounds(*seen, rule=rule, start=6, **values, **mode)
    true = np.where(true < 0, -1, true - cut)
    assert (or_never(earliest) <= or_never(true)).all()
    assert (or_never(true) <= or_never(latest)).all()


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 2**32 - 1))
def test_every_gap_widens_the_bounds(seed):
    tmean, rain = a_season(seed, days=25, cells=20, missing=0.05)
    earliest, latest = hatch.bounds(tmean, rain, **PUBLISHED)
    lost = np.where(np.random.default_rng(seed).random(rain.shape) < 0.1, np.nan, rain).astype(np.float32)
    wider = hatch.bounds(tmean, lost, **PUBLISHED)
    assert (or_never(wider[0]) <= or_never(earliest)).all()
    assert (or_never(wider[1]) >= or_never(latest)).all()


def test_bounds_worked_by_hand():
    # R is 1 April; 5 April is not known. Cool: 2-11 April. Warm: the run begins on the 6th, to the 15th.
    # Days before the array can't matter from 31 March on: February rain is out of a five-day window.
    tmean, rain = april({1: 6.0}, {1: 15.0})
    tmean[30 + 5] = np.nan
    rule = {"rain_more_than": 5.0, "rain_days": 5, "cool_below": 20.5, "cool_days": 10, "start": 30}
    earliest, latest = hatch.bounds(tmean, rain, **rule)
    assert (day_of_april(earliest), day_of_april(latest)) == (11, 15)


def test_days_before_the_array_are_unknown_to_bounds():
    # dry, cool days from the first one on. Soaked the day before: R is day 0, the run days 1-4.
    # Otherwise never. The rule itself claims nothing.
    tmean, rain = np.full((20, 1), 10.0, np.float32), np.zeros((20, 1), np.float32)
    earliest, latest = hatch.bounds(tmean, rain, **PUBLISHED)
    assert (earliest[0], latest[0], hatch.rain_then_cool(tmean, rain, **PUBLISHED)[0]) == (4, -1, -1)


def test_bounds_use_the_known_part_of_a_window():
    # 20 mm on day 1 is more than 5 mm whatever fell before the array: R = 1 at the latest, run 2-5
    tmean, rain = np.full((20, 1), 10.0, np.float32), np.zeros((20, 1), np.float32)
    rain[1] = 20
    _, latest = hatch.bounds(tmean, rain, **PUBLISHED)
    assert latest[0] == 5


def test_bounds_refuse_a_rule_that_extremes_do_not_bound():
    # by hand: rain on day 2 alone gives R = 2 and the run 3-5; rain on day 0 too gives a run that begins on
    # day 1 and breaks on day 2, and no rain comes after it
    longer = np.array([[10], [10], [25], [10], [10], [10]], np.float32)
    rule = {"rain_more_than": 5.0, "rain_days": 1, "cool_below": 16.0, "cool_days": 3, "rain_again": True}
    one = np.array([[0], [0], [9], [0], [0], [0]], np.float32)
    two = np.array([[9], [0], [9], [0], [0], [0]], np.float32)
    assert hatch.rain_then_cool(longer, one, **rule)[0] == 5
    assert hatch.rain_then_cool(longer, two, **rule)[0] == -1
    with pytest.raises(ValueError, match="rain_again"):
        hatch.bounds(longer, one, **rule)


# --- refusals ----------------------------------------------------------------------------------


def test_impossible_values_are_named():
    tmean, rain = a_season(seed=7)
    for name, array, value in (("rain", rain, -1.0), ("rain", rain, np.inf), ("tmean", tmean, -np.inf)):
        kept, array[3, 5] = array[3, 5], value
        for rule, values in ((hatch.first_day, PRACTICE), (hatch.rain_then_cool, PUBLISHED)):
            with pytest.raises(ValueError, match=f"{name} on day 3 in cell 5"):
                rule(tmean, rain, **values)
        with pytest.raises(ValueError, match=f"{name} on day 3 in cell 5"):
            hatch.rain_then_cool(tmean, rain, return_rain_day=True, **PUBLISHED)
        array[3, 5] = kept


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        ({"rain_days": 0}, "rain_days is 0"),
        ({"cool_days": 0}, "cool_days is 0"),
        ({"start": -1}, "start is -1"),
        ({"rain_again": True, "consecutive": False}, "rain_again needs"),
    ],
)
def test_unusable_parameters_are_named(changes, says):
    with pytest.raises(ValueError, match=says):
        hatch.rain_then_cool(*a_season(seed=8), **(PUBLISHED | changes))


def test_unusable_arrays_are_named():
    tmean, rain = a_season(seed=9)
    with pytest.raises(ValueError, match="one shape"):
        hatch.first_day(tmean, rain[:-1])
    with pytest.raises(ValueError, match="float32 or float64"):
        hatch.first_day(np.zeros((40, 60), np.int64), rain)
