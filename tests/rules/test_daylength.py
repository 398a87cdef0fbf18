"""Day length by both models at worked days."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rules import daylength


# CBM formula (Forsythe et al. 1995) worked with independent code to four places.
@pytest.mark.parametrize(
    ("latitude", "day", "sun_below_horizon", "expected"),
    [
        (-35, 172, 0.8333, 9.7975),
        (-35, 355, 0.8333, 14.5123),
        (-20, 246, 0.8333, 11.7353),
        (-20, 246, 0.0, 11.6159),
        (0, 80, 0.0, 12.0),
    ],
)
def test_hours_worked_days(latitude, day, sun_below_horizon, expected):
    assert daylength.hours(latitude, day, sun_below_horizon) == pytest.approx(expected, abs=5e-5)


def test_fao56_worked_day():
    # FAO-56, example of equation 34: latitude -20, 3 September (day 246): 11.7 h; to four places 11.6656
    assert daylength.fao56(-20, 246) == pytest.approx(11.6656, abs=5e-5)


@pytest.mark.parametrize("model", [daylength.hours, daylength.fao56])
def test_polar_day_and_night(model):
    assert model(80, 172) == 24
    assert model(80, 355) == 0
    assert model(-80, 355) == 24


@pytest.mark.parametrize("model", [daylength.hours, daylength.fao56])
def test_missing_stays_missing_and_shapes_broadcast(model):
    got = model(np.array([[-35.0], [np.nan]]), np.array([1, 100, 200]))
    assert got.shape == (2, 3)
    np.testing.assert_array_equal(np.isnan(got), [[False] * 3, [True] * 3])


@pytest.mark.parametrize("model", [daylength.hours, daylength.fao56])
def test_impossible_places_and_days_are_refused(model):
    with pytest.raises(ValueError, match="latitude"):
        model(90.1, 10)
    with pytest.raises(ValueError, match="day_of_year"):
        model(0, 367)


@given(latitude=st.floats(-89, 89), day=st.integers(1, 366))
def test_the_other_hemisphere_has_the_rest_of_the_day(latitude, day):
    # with the sun's centre on the horizon, day here and day at the mirrored latitude make 24 hours
    for model in (lambda *at: daylength.hours(*at, 0.0), daylength.fao56):
        assert model(latitude, day) + model(-latitude, day) == pytest.approx(24, abs=1e-6)
        assert 0 <= model(latitude, day) <= 24
