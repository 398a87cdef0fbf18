"""What the benches share: fair timing, the anchor *reading once*, and the shape of a row."""

import time
from collections.abc import Callable, Mapping
from statistics import median
from typing import Any

import numba
import numpy as np


def interleaved(variants: Mapping[str, Callable[[], object]], rounds: int = 15) -> dict[str, float]:
    """Median seconds of each variant, run in turn so that a busy spell of the machine hits all alike."""
    taken: dict[str, list[float]] = {name: [] for name in variants}
    for variant in variants.values():
        variant()  # compiles, fills caches
    for _ in range(rounds):
        for name, variant in variants.items():
            began = time.perf_counter()
            variant()
            taken[name].append(time.perf_counter() - began)
    return {name: median(seconds) for name, seconds in taken.items()}


def row(bench: str, ours_s: float, other_s: float, other_is: str, goal: float, better: str = "lower") -> dict[str, Any]:
    """One result; `ratio` is ours / other in the sense of the goal: time where lower is better, else speed."""
    ratio = ours_s / other_s if better == "lower" else other_s / ours_s
    return {
        "bench": bench,
        "ours_s": round(ours_s, 6),
        "other_s": round(other_s, 6),
        "other_is": other_is,
        "ratio": round(ratio, 3),
        "goal": goal,
        "better": better,
    }


@numba.njit(parallel=True, fastmath=True)
def read_once(first: np.ndarray, second: np.ndarray) -> float:
    """Sum two arrays of equal shape on all threads: the least that anything reading them can take."""
    parts = np.zeros(first.shape[0], np.float32)
    for i in numba.prange(first.shape[0]):
        total = np.float32(0)
        for j in range(first.shape[1]):
            total += first[i, j] + second[i, j]
        parts[i] = total
    return parts.sum()
