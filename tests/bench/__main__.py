"""`python -m tests.bench [NAME]`: run every bench, or one, and print one JSON line a row."""

import importlib
import json
import pkgutil
import sys
from collections.abc import Iterator
from types import ModuleType

import service  # noqa: F401  (before numba: points the cache of compiled code at a writable folder)
from tests import bench


def modules() -> Iterator[ModuleType]:
    """The modules of this folder that have rows."""
    for found in sorted(pkgutil.iter_modules(bench.__path__), key=lambda m: m.name):
        if found.name != "__main__":
            module = importlib.import_module(f"tests.bench.{found.name}")
            if hasattr(module, "rows"):
                yield module


def main(arguments: list[str]) -> int:
    """Print the rows; 2 if no bench has that name."""
    only = arguments[0] if arguments else None
    printed = 0
    for module in modules():
        for result in module.rows(only):
            print(json.dumps(result), flush=True)
            printed += 1
    if not printed:
        print(f"no bench is called {only}", file=sys.stderr)
    return 0 if printed else 2


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
