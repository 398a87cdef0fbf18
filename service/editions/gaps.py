"""Where the weather of the last days is missing: a hatch may pass unseen there, and readers are told so."""

from collections.abc import Collection, Mapping
from dataclasses import dataclass
from datetime import timedelta

import numpy as np
import numpy.typing as npt

from rules.records import CellDays, Known

DAYS = 14


@dataclass(frozen=True, slots=True)
class Gaps:
    """The days up to yesterday, and by rule-grid cell those among them that lack rain or temperature."""

    days: int
    by_cell: Mapping[int, frozenset[int]]

    def near(self, cells: Collection[int]) -> int:
        """On how many of the days the weather of any of some cells is missing; a cell that has none lacks all."""
        every = frozenset(range(self.days))
        return len(frozenset().union(*(self.by_cell.get(cell, every) for cell in cells)))


def gaps(known: Known) -> Gaps:
    """The gaps in the last 14 days, or in those since the season opened: no earlier weather is asked for."""
    days = max(0, min(DAYS, (known.today - known.season_from).days))
    if known.weather is None:
        return Gaps(days, {})
    missing = _missing(known, known.weather, days)
    cells = known.weather.cells
    return Gaps(
        days, {int(cell): frozenset(np.flatnonzero(gone).tolist()) for cell, gone in zip(cells, missing.T, strict=True)}
    )


def _missing(known: Known, weather: CellDays, days: int) -> npt.NDArray[np.bool_]:
    """By day and cell; days before the weather begins or after it ends are missing."""
    missing = np.ones((days, weather.cells.size), np.bool_)
    unknown = np.isnan(weather.tmean) | np.isnan(weather.rain)
    first = (known.today - timedelta(days=days) - weather.first_day).days
    for at in range(days):
        if 0 <= first + at < len(unknown):
            missing[at] = unknown[first + at]
    return missing
