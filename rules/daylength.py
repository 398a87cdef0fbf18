"""Hours of daylight by two published models, which define the day differently."""

from typing import Any

import numpy as np
import numpy.typing as npt


def hours(
    latitude: npt.ArrayLike, day_of_year: npt.ArrayLike, sun_below_horizon: float = 0.8333
) -> npt.NDArray[np.float64]:
    """Day length by the CBM model.

    Parameters
    ----------
    latitude : array_like
        Positive north. [degrees]
    day_of_year : array_like
        1 to 366, of a shape that fits the latitude's.
    sun_below_horizon : float, default 0.8333
        How far the sun's centre is below the horizon when the day begins and ends: 0 its centre on the
        horizon, 0.26667 its top, 0.8333 its top as seen through the air. [degrees]

    Returns
    -------
    array
        0 in polar night to 24 in polar day; NaN in, NaN out. [h]

    Raises
    ------
    ValueError
        A latitude beyond the poles, or a day of the year out of range.

    References
    ----------
    .. [1] W. C. Forsythe et al. A model comparison for daylength as a function of latitude and day of
       year. Ecological Modelling 80:87-95, 1995. doi:10.1016/0304-3800(94)00034-F
    """
    lat, day = _checked(latitude, day_of_year)
    theta = 0.2163108 + 2 * np.arctan(0.9671396 * np.tan(0.00860 * (day - 186)))
    declination = np.arcsin(0.39795 * np.cos(theta))
    dip = np.sin(np.radians(sun_below_horizon))
    cosine = (dip + np.sin(lat) * np.sin(declination)) / (np.cos(lat) * np.cos(declination))
    return np.asarray(24 - 24 / np.pi * np.arccos(np.clip(cosine, -1, 1)))


def fao56(latitude: npt.ArrayLike, day_of_year: npt.ArrayLike) -> npt.NDArray[np.float64]:
    """Day length by FAO-56, equations 24, 25 and 34: the sun's centre on the horizon, no air.

    Parameters
    ----------
    latitude : array_like
        Positive north. [degrees]
    day_of_year : array_like
        1 to 366, of a shape that fits the latitude's.

    Returns
    -------
    array
        0 to 24; NaN in, NaN out. [h]

    Raises
    ------
    ValueError
        A latitude beyond the poles, or a day of the year out of range.

    Notes
    -----
    The book gives it for latitudes up to 55 degrees; beyond the polar circles it is clipped here.

    References
    ----------
    .. [1] R. G. Allen et al. Crop evapotranspiration. FAO Irrigation and Drainage Paper 56, 1998.
    """
    lat, day = _checked(latitude, day_of_year)
    declination = 0.409 * np.sin(2 * np.pi / 365 * day - 1.39)
    sunset = np.arccos(np.clip(-np.tan(lat) * np.tan(declination), -1, 1))
    return np.asarray(24 / np.pi * sunset)


def _checked(latitude: npt.ArrayLike, day_of_year: npt.ArrayLike) -> tuple[npt.NDArray[Any], npt.NDArray[Any]]:
    """Latitude in radians and the day as floats."""
    lat, day = np.asarray(latitude, float), np.asarray(day_of_year, float)
    if (np.abs(lat) > 90).any():
        raise ValueError("latitude must lie between -90 and 90 degrees")
    if ((day < 1) | (day > 366)).any():
        raise ValueError("day_of_year must lie between 1 and 366")
    return np.radians(lat), day
