"""Degree-days from daily extremes, and their sums over days some of which are missing."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]


def single_sine(
    tmin: npt.ArrayLike, tmax: npt.ArrayLike, lower: float, upper: float | None = None
) -> npt.NDArray[np.float64]:
    """Degree-days of each day by the single sine, with a horizontal cutoff.

    Parameters
    ----------
    tmin, tmax : array_like
        Daily extremes of air temperature, of shapes that fit each other. [°C]
    lower : float
        Threshold below which nothing develops. [°C]
    upper : float, optional
        Threshold above which development goes no faster. [°C]

    Returns
    -------
    array
        At least 0; NaN where an extreme is NaN. [°C d]

    Raises
    ------
    ValueError
        tmin above tmax, or `upper` not above `lower`.

    Notes
    -----
    The day is one sine between its own extremes; the next day's minimum plays no part.

    References
    ----------
    .. [1] G. L. Baskerville and P. Emin. Rapid estimation of heat accumulation from maximum and minimum
       temperatures. Ecology 50:514-517, 1969. doi:10.2307/1933912
    """
    return _between(_sine_above, tmin, tmax, lower, upper)


def triangle(
    tmin: npt.ArrayLike, tmax: npt.ArrayLike, lower: float, upper: float | None = None
) -> npt.NDArray[np.float64]:
    """Degree-days of each day by the single triangle, with a horizontal cutoff.

    Parameters
    ----------
    tmin, tmax : array_like
        Daily extremes of air temperature, of shapes that fit each other. [°C]
    lower : float
        Threshold below which nothing develops. [°C]
    upper : float, optional
        Threshold above which development goes no faster. [°C]

    Returns
    -------
    array
        At least 0; NaN where an extreme is NaN. [°C d]

    Raises
    ------
    ValueError
        tmin above tmax, or `upper` not above `lower`.

    Notes
    -----
    The day rises in a straight line from its minimum to its maximum and falls back in another.
    """
    return _between(_triangle_above, tmin, tmax, lower, upper)


def _between(
    above: Callable[[Floats, Floats, float], Floats],
    tmin: npt.ArrayLike,
    tmax: npt.ArrayLike,
    lower: float,
    upper: float | None,
) -> Floats:
    """What lies above the lower threshold less what lies above the upper one."""
    low, high = np.asarray(tmin, float), np.asarray(tmax, float)
    if (low > high).any():
        raise ValueError("tmin is above tmax on some day")
    if upper is not None and not upper > lower:
        raise ValueError(f"upper ({upper}) must be above lower ({lower})")
    found = above(low, high, lower)
    return found if upper is None else np.maximum(found - above(low, high, upper), 0)


def _sine_above(tmin: Floats, tmax: Floats, threshold: float) -> Floats:
    mean, swing = (tmax + tmin) / 2, (tmax - tmin) / 2
    flat = swing < 1e-9  # a day without swing has no crossing to work out
    crossing = np.where(flat, np.sign(threshold - mean), (threshold - mean) / np.where(flat, 1, swing))
    crossing = np.clip(crossing, -1, 1)  # at -1 the whole day lies above, at 1 none of it
    area = (mean - threshold) * (np.pi / 2 - np.arcsin(crossing)) + swing * np.sqrt(1 - crossing**2)
    above: Floats = np.maximum(area / np.pi, 0)
    return above


def _triangle_above(tmin: Floats, tmax: Floats, threshold: float) -> Floats:
    swing = tmax - tmin
    peak = np.clip(tmax - threshold, 0, swing) ** 2 / (2 * np.where(swing == 0, 1, swing))
    return np.where(threshold <= tmin, (tmax + tmin) / 2 - threshold, peak + 0 * swing)


@dataclass(frozen=True, slots=True, eq=False)
class Accumulated:
    """Running sums from the start day on, (days, …) [°C d]; before it 0.

    `low` and `high` are equal until the first long gap and bound the sum from there on. `filled` marks
    the days that were filled from their neighbours, `missing` those that only bounds stand for.
    """

    low: Floats
    high: Floats
    filled: npt.NDArray[np.bool_]
    missing: npt.NDArray[np.bool_]


def accumulate(
    dd: npt.ArrayLike, start: int, low: npt.ArrayLike, high: npt.ArrayLike, *, fill_days: int = 2
) -> Accumulated:
    """Running sum of daily degree-days that says what missing days do to it.

    Parameters
    ----------
    dd : (days, …) array
        Daily degree-days, NaN where missing. [°C d]
    start : int
        First day that counts.
    low, high : array_like
        What stands for a day in a long gap: the station's 10 % and 90 % values for that time of year,
        of a shape that fits `dd`. [°C d]
    fill_days : int, default 2
        The longest gap that is filled in a straight line between the days beside it; at either end of
        the array by the one day beside it. [d]

    Returns
    -------
    Accumulated
        Running sums and marks, each of the shape of `dd`.

    Raises
    ------
    ValueError
        `start` is not a day of the array, or `low` is above `high` or not given on a day that needs it.
    """
    values = np.asarray(dd, float)
    if not 0 <= start < len(values):
        raise ValueError(f"start is {start}; it must be one of the {len(values)} days")
    least, most = (np.broadcast_to(np.asarray(bound, float), values.shape) for bound in (low, high))
    columns = values.reshape(len(values), -1)
    whole = np.stack([_filled(column, fill_days) for column in columns.T], axis=1).reshape(values.shape)
    missing = np.isnan(whole)
    if not (least <= most)[missing].all():
        raise ValueError("low and high must be given, low first, on every day of a long gap")
    sums = []
    for bound in (least, most):
        counted = np.where(missing, bound, whole)
        counted[:start] = 0
        sums.append(np.cumsum(counted, axis=0))
    return Accumulated(sums[0], sums[1], np.isnan(values) & ~missing, missing)


def _filled(column: Floats, fill_days: int) -> Floats:
    """One cell's days with its short gaps filled; a column without any known day stays as it is."""
    gap = np.isnan(column)
    if not gap.any() or gap.all():
        return column
    days = np.arange(column.size)
    edges = np.flatnonzero(np.diff(np.concatenate([[False], gap, [False]]).astype(np.int8)))
    filled = column.copy()
    for first, end in zip(edges[::2], edges[1::2], strict=True):
        if end - first <= fill_days:
            filled[first:end] = np.interp(days[first:end], days[~gap], column[~gap])
    return filled
