"""How memory is got while a million rows are checked and taken."""

import gc
from collections.abc import Iterator
from contextlib import contextmanager

import pyarrow as pa

_OBJECTS = 2_000_000  # new objects between two searches for cycles


@contextmanager
def for_many_rows() -> Iterator[None]:
    """Columns in memory that is used again, and few searches for cycles, which rows don't make.

    Memory that is new to a process costs the system more than filling it does; of Arrow's ways to get it,
    jemalloc's asks for the least. Half a second of eight goes into looking for cycles otherwise.
    """
    pool, thresholds = pa.default_memory_pool(), gc.get_threshold()
    gc.set_threshold(_OBJECTS)
    if "jemalloc" in pa.supported_memory_backends():
        pa.set_memory_pool(pa.jemalloc_memory_pool())
    try:
        yield
    finally:
        pa.set_memory_pool(pool)
        gc.set_threshold(*thresholds)
