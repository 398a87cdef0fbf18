"""A count set against the number that matters, and the units that may be turned into each other."""

from dataclasses import dataclass
from math import isnan
from typing import Literal

from rules.sampling import SpotMean, more_spots, spot_interval

__all__ = ["Comparison", "NotConvertible", "SpotMean", "compare", "convert", "spot_interval"]

Verdict = Literal["below", "near", "at_or_above", "no_agreed_number", "count_by_spots"]

# Units with a fixed or given relation to a square metre; all others stay what they are.
_OTHERS = {
    "holes_per_leaf": "holes are damage: they do not tell how many insects are on a leaf",
    "per_10_sweeps": "a sweep net catches an unknown share of what is there",
    "per_trap_night": "a trap draws from an unknown area",
    "per_refuge": "a refuge shows activity, not how many are there",
    "percent_plants": "a share of plants does not tell how many are on them",
}


class NotConvertible(ValueError):
    """Two units with no sound way from one to the other, or without the figure that it needs."""


@dataclass(frozen=True, slots=True)
class Comparison:
    """What a count says about the number that matters, and how many more spots may settle it.

    `more_spots` is None where nothing is left to settle, or where no reasonable number would do.
    """

    verdict: Verdict
    more_spots: int | None = None


def compare(
    mean: float,
    interval: tuple[float, float] | None,
    threshold_low: float | None,
    threshold_high: float | None,
    *,
    spots: int | None = None,
    confidence: float = 0.95,
) -> Comparison:
    """Set a mean count and its interval against a number that itself is in doubt.

    Parameters
    ----------
    mean : float
        Mean count. [the number's unit]
    interval : (float, float) or None
        Lower and upper end; None without counts by spot.
    threshold_low, threshold_high : float or None
        The number that matters, from its lower to its upper doubt; None where none is agreed on.
    spots : int, optional
        Spots behind the interval; needed to say how many more.
    confidence : float, default 0.95
        Coverage of the interval. [1]

    Returns
    -------
    Comparison
        "below": the whole interval lies below `threshold_low`; "at_or_above": all of it lies at or
        above `threshold_high`; "near": anything else; "no_agreed_number": nothing to compare with;
        "count_by_spots": a count without an interval is never called. `more_spots` comes with "near"
        if the mean lies outside the number's own doubt; inside it no counting can settle anything.

    Raises
    ------
    ValueError
        The interval or the number runs from high to low.
    """
    if threshold_low is None or threshold_high is None:
        return Comparison("no_agreed_number")
    if threshold_low > threshold_high:
        raise ValueError(f"the number runs from {threshold_low} to {threshold_high}: the low end must come first")
    if interval is None or isnan(mean) or isnan(interval[0]) or isnan(interval[1]):
        return Comparison("count_by_spots")
    if not interval[0] <= mean <= interval[1]:
        raise ValueError(f"the mean {mean} must lie in its interval {interval}")
    if interval[1] < threshold_low:
        return Comparison("below")
    if interval[0] >= threshold_high:
        return Comparison("at_or_above")
    margin = max(threshold_low - mean, mean - threshold_high)
    if spots is None or spots < 2 or margin <= 0:
        return Comparison("near")
    return Comparison("near", more_spots(interval[1] - mean, margin, spots, confidence=confidence))


def convert(
    value: float, unit: str, to: str, *, plants_per_m2: float | None = None, row_spacing_m: float | None = None
) -> float:
    """A count in another unit, where there is a sound way.

    Parameters
    ----------
    value : float
        Count. [unit]
    unit, to : str
        per_m2, per_100cm2, per_plant, per_metre_row and per_half_metre_row turn into each other; any
        unit into itself; no others.
    plants_per_m2 : float, optional
        Stand count, needed from or to per_plant. [1/m2]
    row_spacing_m : float, optional
        Distance between rows, needed from or to a length of row. [m]

    Returns
    -------
    float
        Count. [to]

    Raises
    ------
    NotConvertible
        With the reason.
    """
    if unit == to:
        return value
    ways = [_per_m2(each, plants_per_m2, row_spacing_m) for each in (unit, to)]
    return value * ways[0] / ways[1]


def _per_m2(unit: str, plants_per_m2: float | None, row_spacing_m: float | None) -> float:
    """What one of a unit is per square metre. [1/m2]"""
    if unit in _OTHERS:
        raise NotConvertible(f"{unit} can't be turned into another unit: {_OTHERS[unit]}")
    if unit == "per_plant":
        return _given(plants_per_m2, unit, "the stand count (plants_per_m2)")
    if unit in ("per_metre_row", "per_half_metre_row"):
        rows = 1 / _given(row_spacing_m, unit, "the row spacing (row_spacing_m)")
        return rows if unit == "per_metre_row" else 2 * rows
    if unit in ("per_m2", "per_100cm2"):
        return 1.0 if unit == "per_m2" else 100.0
    raise NotConvertible(f"{unit} is not a unit that counts are kept in")


def _given(value: float | None, unit: str, what: str) -> float:
    if value is None or not value > 0:
        raise NotConvertible(f"{unit} needs {what}, more than 0")
    return value
