"""Kernels compile where nothing can be cached, too."""

import numpy as np

from rules.compiled import fetch, kernel


def test_without_a_place_for_the_cache_a_kernel_compiles_in_memory():
    # numba caches by source file; a function without one is refused a cache
    made: dict = {}
    exec("def twice(x):\n    return 2 * x\n", made)
    assert kernel()(made["twice"])(21) == 42


def test_fetch_reads_nothing_and_changes_nothing():
    weather = np.arange(600, dtype=np.float32).reshape(2, 300)
    fetch(weather, 1, 0, 300)
    np.testing.assert_array_equal(weather.ravel(), np.arange(600))
