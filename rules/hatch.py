"""When the weather that a hatch needs has come: rain, then cool days, cell by cell.

Weather arrays have shape (days, cells), float32 or float64, day 0 first: `tmean` daily mean air
temperature [°C], `rain` daily rain [mm]. NaN means not known; a window that holds NaN, or that reaches
before the first day of the array, is not met. What might have been there is the business of `bounds`.
"""

import threading
from collections.abc import Callable
from typing import Any

import numpy as np
import numpy.typing as npt

from rules import hatch_kernels as kernels
from rules.compiled import BLOCK

Days = npt.NDArray[np.int32]
Weather = npt.NDArray[np.floating[Any]]

# One of numba's threading layers must not be entered twice at once; web requests and jobs may try.
_one_at_a_time = threading.Lock()


def first_day(
    tmean: Weather,
    rain: Weather,
    *,
    cool_at_most: float = 20.0,
    cool_days: int = 7,
    rain_at_least: float = 5.0,
    rain_within: int = 7,
    start: int = 0,
) -> Days:
    """First day with a run of cool days behind it and one wet day not long ago.

    Parameters
    ----------
    tmean : (days, cells) array
        Daily mean air temperature. [°C]
    rain : (days, cells) array
        Daily rain. [mm]
    cool_at_most : float, default 20.0
        The last `cool_days` means, that day's included, are all at most this. [°C]
    cool_days : int, default 7
        Length of the cool run. [d]
    rain_at_least : float, default 5.0
        Some single day of the last `rain_within`, that day included, has at least this. [mm]
    rain_within : int, default 7
        How far back that day may lie. [d]
    start : int, default 0
        First day that may be the answer; windows may reach back before it.

    Returns
    -------
    (cells,) int32 array
        Index of the day, -1 where there is none.

    Raises
    ------
    ValueError
        Shapes differ, a window is shorter than a day, rain is negative, or a value is infinite.

    Notes
    -----
    Common practice, no source: it serves as an understudy of `rain_then_cool`. More rain or cooler
    days never make the answer later.
    """
    tmean, rain = _checked(tmean, rain, start, cool_days=cool_days, rain_within=rain_within)
    days, number = len(tmean), tmean.dtype.type
    windows = (number(cool_at_most), min(cool_days, days + 1), number(rain_at_least), min(rain_within, days + 1))
    out = np.full(tmean.shape[1], -1, np.int32)
    _run(kernels.first_day_block, kernels.first_day_blocks, tmean, rain, (min(start, days), *windows), (out,))
    return out


def rain_then_cool(
    tmean: Weather,
    rain: Weather,
    *,
    rain_more_than: float,
    rain_days: int,
    cool_below: float,
    cool_days: int,
    consecutive: bool = True,
    rain_again: bool = False,
    start: int = 0,
    return_rain_day: bool = False,
) -> Any:
    """Day on which a cool spell that follows the season's first good rain is complete.

    The rain day R is the first day from `start` on for which the rain of the last `rain_days` days,
    that day's included, adds up to more than `rain_more_than`. The cool run begins on R + 1 at the
    earliest; the answer is its last day.

    Parameters
    ----------
    tmean : (days, cells) array
        Daily mean air temperature, (tmin + tmax) / 2. [°C]
    rain : (days, cells) array
        Daily rain. [mm]
    rain_more_than : float
        The rain sum must exceed this; published: 5 mm. [mm]
    rain_days : int
        Days that the sum runs over; the abstract does not state it. [d]
    cool_below : float
        Published: 20.5 °C for the western, 16 °C for the south-eastern type. No default: the district
        chooses its type. [°C]
    cool_days : int
        Length of the cool run; published: 10. [d]
    consecutive : bool, default True
        Each day of the run is below `cool_below`. False: the mean of `cool_days` days is, all of them
        after R. The abstract allows both readings.
    rain_again : bool, default False
        True: when a run that had begun is broken, by a day that is not cool or not known, the search
        for a rain day starts anew on the day after the break.
    start : int, default 0
        First day that may be R; the rain window may reach back before it.
    return_rain_day : bool, default False
        Also return R.

    Returns
    -------
    (cells,) int32 array, or a pair of them
        Index of the run's last day, -1 where there is none; with `return_rain_day` also R (with
        `rain_again`, the newest one; -1 after a break without new rain).

    Raises
    ------
    ValueError
        Shapes differ, a window is shorter than a day, rain is negative, a value is infinite, or
        `rain_again` without `consecutive`, since a mean has no run that could break.

    Notes
    -----
    The published rule gives the median day of a paddock; hatching in patches begins earlier. Sums are
    compared to the precision of float32: one that exceeds `rain_more_than` by less than 5e-7 of it
    and a millionth of a millimetre counts as equal, so that 1.6 mm and 3.4 mm are not more than 5 mm.
    Without `rain_again`, more rain or cooler days never make the answer later; with it they can.

    References
    ----------
    .. [1] Predicting the timing of first generation egg hatch for the pest redlegged earth mite
       Halotydeus destructor. Experimental and Applied Acarology 65:259-276, 2015.
       doi:10.1007/s10493-014-9876-x
    """
    if rain_again and not consecutive:
        raise ValueError("rain_again needs consecutive=True: a mean has no run that could break")
    tmean, rain = _checked(tmean, rain, start, rain_days=rain_days, cool_days=cool_days)
    days, cells = tmean.shape
    start, rain_days, cool_days = min(start, days), min(rain_days, days + 1), min(cool_days, days + 1)
    out, rain_day = np.full(cells, -1, np.int32), np.full(cells, -1, np.int32)
    shape = (start, _just_over(rain_more_than), rain_days, tmean.dtype.type(cool_below))
    if consecutive and not rain_again:
        blocks = kernels.rain_then_cool_block, kernels.rain_then_cool_blocks
        _run(*blocks, tmean, rain, (*shape, cool_days), (out, rain_day))
    else:
        _refuse_impossible(tmean, rain)
        limit = -_just_over(-cool_below * cool_days)
        kernels.rain_then_cool_cells(tmean, rain, *shape, limit, cool_days, consecutive, rain_again, out, rain_day)
    return (out, rain_day) if return_rain_day else out


def bounds(
    tmean: Weather, rain: Weather, *, rule: Callable[..., Any] = rain_then_cool, start: int = 0, **parameters: Any
) -> tuple[Days, Days]:
    """Earliest and latest day that a rule could give if the unknown values were known.

    Unknown are the NaN and all days before the array. For the earliest they are taken as most
    favourable (soaking and cold: every window that holds one and lies on an allowed day is met by
    it); for the latest as least favourable (no rain, and too warm).

    Parameters
    ----------
    tmean, rain : (days, cells) arrays
        As the rule takes them. [°C], [mm]
    rule : callable, default rain_then_cool
        `rain_then_cool` or `first_day`.
    start : int, default 0
        As the rule takes it.
    **parameters
        The rule's own; `return_rain_day` and `rain_again=True` are refused.

    Returns
    -------
    earliest, latest : (cells,) int32 arrays
        The true day lies between them, both included. `earliest` -1: it can't have come. `latest`
        -1: it need not have come by the array's end.

    Raises
    ------
    ValueError
        As the rule, and for `rain_again=True`: a broken run there can make more rain or cool mean a
        later day, so that extremes bound nothing.

    Notes
    -----
    The rule itself calls a window that holds NaN not met, even if the known part of it is wet enough;
    here the known part counts. So `latest` may lie before the day that the rule gives for the same
    arrays, never after the day that it would give for the true values.
    """
    if parameters.get("rain_again") or parameters.get("return_rain_day"):
        raise ValueError("bounds takes neither rain_again nor return_rain_day")
    tmean, rain = _checked(tmean, rain, start)
    before = max(parameters.get("rain_days", 1), parameters.get("rain_within", 7), parameters.get("cool_days", 7)) - 1
    unknown = np.full((before, tmean.shape[1]), np.nan, tmean.dtype)
    longer = np.concatenate([unknown, tmean]), np.concatenate([unknown, rain])

    def taken_as(degrees: float, millimetres: float) -> Days:
        filled = (
            np.where(np.isnan(a), a.dtype.type(v), a) for a, v in zip(longer, (degrees, millimetres), strict=True)
        )
        day = rule(*filled, start=start + before, **parameters)
        return np.where(day < 0, -1, day - before).astype(np.int32)

    return taken_as(-1e6, 1e6), taken_as(1e6, 0.0)


def _just_over(limit: float) -> float:
    """The least sum that counts as more than `limit`, beyond float32 rounding."""
    return limit + abs(limit) * 5e-7 + 1e-6


def _checked(tmean: Weather, rain: Weather, start: int, **windows: int) -> tuple[Weather, Weather]:
    """Both arrays in one layout and type that the kernels know, or a ValueError."""
    tmean, rain = np.asarray(tmean), np.asarray(rain)
    if tmean.ndim != 2 or tmean.shape != rain.shape:
        raise ValueError(f"tmean {tmean.shape} and rain {rain.shape} must have one shape, (days, cells)")
    if {tmean.dtype, rain.dtype} - {np.dtype(np.float32), np.dtype(np.float64)}:
        raise ValueError(f"tmean ({tmean.dtype}) and rain ({rain.dtype}) must be float32 or float64")
    if start < 0:
        raise ValueError(f"start is {start}; it must be 0 or later")
    for name, days in windows.items():
        if days < 1:
            raise ValueError(f"{name} is {days}; it must be at least 1")
    kind = np.promote_types(tmean.dtype, rain.dtype)
    return _read_only(tmean, kind), _read_only(rain, kind)


def _read_only(array: Weather, kind: np.dtype[Any]) -> Weather:
    """The array as the one array type that kernels are compiled for; not a copy if it fits already."""
    view = np.ascontiguousarray(array, kind).view()
    view.flags.writeable = False
    return view


def _run(
    block: Any, blocks: Any, tmean: Weather, rain: Weather, values: tuple[Any, ...], out: tuple[Days, ...]
) -> None:
    """Fill the arrays of `out` by blocks of cells, on all threads if there is more than one block."""
    cells = tmean.shape[1]
    if cells <= BLOCK:
        bad = block(tmean, rain, 0, cells, *values, *out)
    else:
        with _one_at_a_time:
            bad = blocks(tmean, rain, *values, *out)
    if bad:
        _refuse_impossible(tmean, rain)


def _refuse_impossible(tmean: Weather, rain: Weather) -> None:
    """Name the first value that can't be weather."""
    for name, wrong, array in (
        ("rain", (rain < 0) | (rain > kernels.HUGE), rain),
        ("tmean", np.abs(tmean) > kernels.HUGE, tmean),
    ):
        if wrong.any():
            day, cell = np.argwhere(wrong)[0]
            raise ValueError(f"{name} on day {day} in cell {cell} is {array[day, cell]}: give NaN if it is not known")
