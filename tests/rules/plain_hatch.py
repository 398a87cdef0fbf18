"""The hatch rules once more, for one cell, as plainly as they can be said; slow, and easy to check by eye."""

import math
from collections.abc import Sequence

import numpy as np


def window(values: Sequence[float], day: int, length: int) -> list[float] | None:
    """The last `length` values up to `day`; None if one is not known or lies before the first day."""
    if day - length + 1 < 0:
        return None
    found = [float(v) for v in values[day - length + 1 : day + 1]]
    return None if any(math.isnan(v) for v in found) else found


def more_than(total: float, limit: float) -> bool:
    return total > limit + abs(limit) * 5e-7 + 1e-6


def first_day(tmean, rain, *, cool_at_most, cool_days, rain_at_least, rain_within, start=0) -> int:
    for day in range(start, len(rain)):
        cool, wet = window(tmean, day, cool_days), window(rain, day, rain_within)
        if cool and wet and max(cool) <= cool_at_most and max(wet) >= rain_at_least:
            return day
    return -1


def is_rain_day(rain, day, rain_more_than, rain_days) -> bool:
    wet = window(rain, day, rain_days)
    return wet is not None and more_than(math.fsum(wet), rain_more_than)


def rain_then_cool(
    tmean, rain, *, rain_more_than, rain_days, cool_below, cool_days, consecutive=True, rain_again=False, start=0
) -> tuple[int, int]:
    rain_day, run = -1, 0
    for day in range(len(rain)):
        if rain_day < 0:
            if day >= start and is_rain_day(rain, day, rain_more_than, rain_days):
                rain_day, run = day, 0
            continue
        cool = float(tmean[day]) < cool_below
        broken, run = run > 0 and not cool, run + 1 if cool else 0
        if consecutive and run == cool_days:
            return day, rain_day
        spell = window(tmean, day, cool_days) if day - cool_days >= rain_day else None
        if not consecutive and spell and more_than(-math.fsum(spell), -cool_below * cool_days):
            return day, rain_day
        if broken and rain_again:
            rain_day = -1
    return -1, rain_day


def over_cells(rule, tmean: np.ndarray, rain: np.ndarray, **parameters) -> np.ndarray:
    """A rule for one cell, applied to each column."""
    return np.array([rule(tmean[:, c], rain[:, c], **parameters) for c in range(tmean.shape[1])])
