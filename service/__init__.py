"""Leafturn's running service."""

import os
from pathlib import Path

__version__ = "0.1.0"


def _cache_compiled_code() -> None:
    """Point numba at a writable cache before anything imports it; without one it compiles in memory."""
    if "NUMBA_CACHE_DIR" in os.environ:
        return
    folder = Path(os.environ.get("LEAFTURN_DATA_DIR", "var")).absolute() / "compiled"
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError:
        return
    if os.access(folder, os.W_OK):
        os.environ["NUMBA_CACHE_DIR"] = str(folder)


_cache_compiled_code()
