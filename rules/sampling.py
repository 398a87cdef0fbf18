"""How much counting an answer takes."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import stdtrit


@dataclass(frozen=True, slots=True)
class SpotMean:
    """A mean count per unit with its interval, from counts by spot."""

    mean: float
    low: float
    high: float
    spots: int


def spot_interval(counts: Sequence[float], units_per_spot: float = 1, *, confidence: float = 0.95) -> SpotMean | None:
    """Mean count per unit and Student's t interval over spots.

    Parameters
    ----------
    counts : sequence of float
        Total count of each spot. [individuals]
    units_per_spot : float, default 1
        Units counted at each spot, such as plants. [units]
    confidence : float, default 0.95
        Coverage of the interval. [1]

    Returns
    -------
    SpotMean or None
        Per unit; the lower end not below 0. None with fewer than two spots: one spot has no spread.

    Raises
    ------
    ValueError
        A count is negative or not a number, or `units_per_spot` is not positive.

    Notes
    -----
    Units within a spot are alike, so spots are the sample, not plants. Where all spots are equal, their
    spread of 0 would claim certainty; then the standard error is that of a Poisson count of their
    total, or of 1 where nothing was found (our choice).
    """
    values = np.asarray(counts, float)
    if not units_per_spot > 0:
        raise ValueError(f"units_per_spot is {units_per_spot}; it must be more than 0")
    if not (values >= 0).all():
        raise ValueError("a spot's count must be a number of 0 or more")
    if values.size < 2:
        return None
    spread = values.std(ddof=1) / np.sqrt(values.size)
    if spread == 0:
        spread = np.sqrt(max(values.sum(), 1)) / values.size
    mean, half = values.mean(), _t(confidence, values.size) * spread
    low, high = max(mean - half, 0), mean + half
    return SpotMean(
        float(mean / units_per_spot), float(low / units_per_spot), float(high / units_per_spot), values.size
    )


def more_spots(half_width: float, margin: float, spots: int, *, confidence: float = 0.95, most: int = 40) -> int | None:
    """Further spots until an interval is narrower than the distance that it must not cross.

    Parameters
    ----------
    half_width : float
        Half of the present t interval. [any unit]
    margin : float
        Distance of the mean from the number it is compared with. [the same unit]
    spots : int
        Spots behind the present interval, at least 2.
    confidence : float, default 0.95
        Coverage of the interval. [1]
    most : int, default 40
        Spots in all beyond which counting on is not worth asking for (our choice).

    Returns
    -------
    int or None
        At least 1; None where `most` spots would not do.

    Notes
    -----
    Supposes that mean and spread stay as they are: what to expect, not a promise.
    """
    spread = half_width * np.sqrt(spots) / _t(confidence, spots)
    for n in range(spots + 1, most + 1):
        if _t(confidence, n) * spread / np.sqrt(n) < margin:
            return n - spots
    return None


def _t(confidence: float, spots: int) -> float:
    """Student's t for a two-sided interval of a mean of so many spots."""
    return float(stdtrit(spots - 1, (1 + confidence) / 2))
