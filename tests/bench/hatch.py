"""`hatch`: the two hatch rules over a large rule grid, beside reading the same arrays once."""

from collections.abc import Iterator
from typing import Any

import numba
import numpy as np

from rules import hatch
from tests.bench.anchors import interleaved, read_once, row

DAYS, CELLS, MISSING = 120, 250_000, 0.01
PUBLISHED = {"rain_more_than": 5.0, "rain_days": 5, "cool_below": 20.5, "cool_days": 10}
GOALS = {"rain_then_cool": 2.5, "first_day": 2.0}


def a_season() -> tuple[np.ndarray, np.ndarray]:
    """A cooling season with showers on one day in seven; hatches spread over all of it."""
    rng = np.random.default_rng(120)
    tmean = rng.standard_normal((DAYS, CELLS), dtype=np.float32) * 4 + 22
    tmean -= np.arange(DAYS, dtype=np.float32)[:, None] * np.float32(0.08)
    rain = rng.standard_gamma(0.5, (DAYS, CELLS), dtype=np.float32) * 6
    rain[rng.random((DAYS, CELLS), dtype=np.float32) > 0.15] = 0
    for array in (tmean, rain):
        array[rng.random((DAYS, CELLS), dtype=np.float32) < MISSING] = np.nan
    return tmean, rain


def rows(only: str | None = None) -> Iterator[dict[str, Any]]:
    """One row a rule; the public call whole, its checks included."""
    if only not in (None, "hatch"):
        return
    tmean, rain = a_season()
    seconds = interleaved(
        {
            "rain_then_cool": lambda: hatch.rain_then_cool(tmean, rain, **PUBLISHED),
            "read": lambda: read_once(tmean, rain),
            "first_day": lambda: hatch.first_day(tmean, rain),
        }
    )
    other_is = f"reading tmean and rain once: numba sum on {numba.get_num_threads()} threads, same process"
    for rule, goal in GOALS.items():
        yield row(f"hatch/{rule}", seconds[rule], seconds["read"], other_is, goal)
