"""The compiled loops behind `rules.hatch`; each block says whether it met a value that can't be weather.

A cell's state is one integer that carries its phase, so that a day is a few selections without a
branch. `UNARMED + d`: waiting for rain, whose window is whole from day d on. `d >= 0`: waiting for
cool, met on day d unless a day in between is not cool. `-1 - d`: met on day d. Steps take whole arrays
and unsigned indices: slices would count references, and signed indices might mean the array's end. `bad`
is a bool, since gathering it in an integer costs `first_day` a fifth.
"""

from typing import Any

import numba
import numpy as np

from rules.compiled import BLOCK, STEP, fetch, kernel

UNARMED = np.int32(2**30)
NEVER = np.int32(-(2**31))
HUGE = 1e30  # beyond any weather: infinities


@kernel()
def _met_on(state: Any, out: Any) -> None:
    for c in range(state.size):
        out[c] = -1 - state[c] if state[c] < 0 else -1


@kernel()
def _rain_then_cool_step(
    t: int, tmean: Any, rain: Any, first: int, last: int, low: int, state: Any, total: Any, rain_day: Any,
    start: int, rain_limit: float, rain_days: int, cool_below: Any, cool_days: int,
) -> bool:  # fmt: skip
    """Day t of the cells first:last; state and total begin at the cell `low`."""
    zero, huge, bad = rain.dtype.type(0), tmean.dtype.type(HUGE), False
    today, met, again = np.int32(t), np.int32(-1 - t), np.int32(t + cool_days)
    blocked = np.int32(UNARMED + t + rain_days)
    whole = np.int32(UNARMED + t) if t >= start else NEVER
    day, leaving = np.uint64(t), np.uint64(max(t - rain_days, 0))
    for cell in range(np.uint64(first), np.uint64(last)):
        c = cell - np.uint64(low)
        was, x, y = state[c], tmean[day, cell], rain[day, cell]
        old = rain[leaving, cell] if t >= rain_days else zero
        total[c] += np.float64(y if y > zero else zero) - np.float64(old if old > zero else zero)
        unarmed = blocked if np.isnan(y) else was
        begins = (was >= UNARMED) & (unarmed <= whole) & (total[c] > rain_limit)
        rain_day[cell] = today if begins else rain_day[cell]
        unarmed = again if begins else unarmed
        armed = was if x < cool_below else again
        armed = met if armed <= today else armed
        state[c] = unarmed if was >= UNARMED else (was if was < 0 else armed)
        bad |= (y < zero) | (y > huge) | (abs(x) > huge)
    return bad


@kernel()
def rain_then_cool_block(
    tmean: Any, rain: Any, low: int, high: int, start: int,
    rain_limit: float, rain_days: int, cool_below: Any, cool_days: int, out: Any, rain_day: Any,
) -> bool:  # fmt: skip
    """Days on which a cool run after rain is complete, and rain days, for the cells low:high."""
    days, cells, bad = tmean.shape[0], high - low, False
    state = np.full(cells, UNARMED + rain_days - 1, np.int32)
    total = np.zeros(cells)
    for t in range(days):
        for first in range(low, high, STEP):
            last = min(first + STEP, high)
            fetch(tmean, min(t + 1, days - 1), first, last)
            fetch(rain, min(t + 1, days - 1), first, last)
            bad |= _rain_then_cool_step(
                t, tmean, rain, first, last, low, state, total, rain_day,
                start, rain_limit, rain_days, cool_below, cool_days,
            )  # fmt: skip
    _met_on(state, out[low:high])
    return bad


@kernel(parallel=True)
def rain_then_cool_blocks(
    tmean: Any, rain: Any, start: int, rain_limit: float, rain_days: int,
    cool_below: Any, cool_days: int, out: Any, rain_day: Any,
) -> bool:  # fmt: skip
    bad = np.zeros(-(-out.size // BLOCK), np.bool_)
    for b in numba.prange(bad.size):
        low, high = b * BLOCK, min((b + 1) * BLOCK, out.size)
        bad[b] = rain_then_cool_block(
            tmean, rain, low, high, start, rain_limit, rain_days, cool_below, cool_days, out, rain_day
        )  # fmt: skip
    return bool(bad.any())


@kernel()
def _first_day_step(
    t: int, tmean: Any, rain: Any, first: int, last: int, low: int, state: Any, wet: Any,
    cool_at_most: Any, cool_days: int, rain_at_least: Any, rain_within: int,
) -> bool:  # fmt: skip
    """Day t of the cells first:last; `wet`, from the cell `low` on, is the last day that the newest rain counts."""
    zero, huge, bad = rain.dtype.type(0), tmean.dtype.type(HUGE), False
    today, met, counts_to = np.int32(t), np.int32(-1 - t), np.int32(t + rain_within - 1)
    warm, missing = np.int32(t + cool_days), np.int32(t + rain_within)
    day = np.uint64(t)
    for cell in range(np.uint64(first), np.uint64(last)):
        c = cell - np.uint64(low)
        was, x, y = state[c], tmean[day, cell], rain[day, cell]
        until = was if x <= cool_at_most else max(was, warm)
        until = max(until, missing) if np.isnan(y) else until
        wet_to = counts_to if y >= rain_at_least else wet[c]
        wet[c] = wet_to
        until = met if (until <= today) & (wet_to >= today) else until
        state[c] = was if was < 0 else until
        bad |= (y < zero) | (y > huge) | (abs(x) > huge)
    return bad


@kernel()
def first_day_block(
    tmean: Any, rain: Any, low: int, high: int, start: int,
    cool_at_most: Any, cool_days: int, rain_at_least: Any, rain_within: int, out: Any,
) -> bool:  # fmt: skip
    """First days on which both looking-back windows are met, for the cells low:high."""
    days, cells, bad = tmean.shape[0], high - low, False
    state = np.full(cells, max(start, cool_days - 1, rain_within - 1), np.int32)
    wet = np.full(cells, -1, np.int32)
    for t in range(days):
        for first in range(low, high, STEP):
            last = min(first + STEP, high)
            fetch(tmean, min(t + 1, days - 1), first, last)
            fetch(rain, min(t + 1, days - 1), first, last)
            bad |= _first_day_step(
                t, tmean, rain, first, last, low, state, wet, cool_at_most, cool_days, rain_at_least, rain_within
            )  # fmt: skip
    _met_on(state, out[low:high])
    return bad


@kernel(parallel=True)
def first_day_blocks(
    tmean: Any, rain: Any, start: int, cool_at_most: Any, cool_days: int, rain_at_least: Any, rain_within: int, out: Any
) -> bool:
    bad = np.zeros(-(-out.size // BLOCK), np.bool_)
    for b in numba.prange(bad.size):
        low, high = b * BLOCK, min((b + 1) * BLOCK, out.size)
        bad[b] = first_day_block(
            tmean, rain, low, high, start, cool_at_most, cool_days, rain_at_least, rain_within, out
        )
    return bool(bad.any())


@kernel()
def rain_then_cool_cell(
    x: Any, y: Any, start: int, rain_limit: float, rain_days: int, cool_below: Any, cool_limit: float,
    cool_days: int, consecutive: bool, rain_again: bool,
) -> tuple[int, int]:  # fmt: skip
    """One cell in any of the rule's modes: (day met, rain day), -1 where there is none."""
    rain_day, run, wet_sum, cool_sum, wet_from, cool_from = -1, 0, 0.0, 0.0, rain_days - 1, cool_days - 1
    for t in range(x.size):
        wet_sum += np.float64(0 if np.isnan(y[t]) else y[t])
        cool_sum += np.float64(0 if np.isnan(x[t]) else x[t])
        if t >= rain_days and not np.isnan(y[t - rain_days]):
            wet_sum -= np.float64(y[t - rain_days])
        if t >= cool_days and not np.isnan(x[t - cool_days]):
            cool_sum -= np.float64(x[t - cool_days])
        wet_from = t + rain_days if np.isnan(y[t]) else wet_from
        cool_from = t + cool_days if np.isnan(x[t]) else cool_from
        if rain_day < 0:
            if t >= start and t >= wet_from and wet_sum > rain_limit:
                rain_day = t
            continue
        broken = run > 0 and not x[t] < cool_below
        run = run + 1 if x[t] < cool_below else 0
        if consecutive and run >= cool_days:
            return t, rain_day
        if not consecutive and t >= rain_day + cool_days and t >= cool_from and cool_sum < cool_limit:
            return t, rain_day
        if broken and rain_again:
            rain_day = -1
    return -1, rain_day


@kernel()
def rain_then_cool_cells(
    tmean: Any, rain: Any, start: int, rain_limit: float, rain_days: int, cool_below: Any, cool_limit: float,
    cool_days: int, consecutive: bool, rain_again: bool, out: Any, rain_day: Any,
) -> None:  # fmt: skip
    """The modes that no block is written for, cell by cell."""
    for c in range(out.size):
        out[c], rain_day[c] = rain_then_cool_cell(
            tmean[:, c], rain[:, c], start, rain_limit, rain_days, cool_below, cool_limit,
            cool_days, consecutive, rain_again,
        )  # fmt: skip
