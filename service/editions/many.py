"""Composing many digests on all cores: worker processes that each hold what the readers share.

What is shared (statements, rule book, head) travels once to each process, what belongs to one reader once
to one of them. Results come back in the order of the items, and only a few chunks are under way at a time,
so memory stays flat however many readers there are.
"""

import gc
import os
import signal
from collections import deque
from collections.abc import Callable, Iterable, Iterator, Sequence
from concurrent.futures import Future, ProcessPoolExecutor
from itertools import islice
from multiprocessing import get_context, parent_process
from threading import Thread
from typing import Any, Generic, TypeVar

Shared = TypeVar("Shared")
Item = TypeVar("Item")
Made = TypeVar("Made")

CHUNK = 64  # items that travel together
AHEAD = 2  # chunks under way for each process
RARELY = 50_000  # new objects before a process looks for cycles among them

_here: tuple[Callable[[Any, Any], Any], Any]


class Composers(Generic[Shared, Item, Made]):
    """Processes that make one thing of each item: `work(shared, item)`, a function of a module's top level.

    With one process the work is done here, without any pickling; the results are the same.
    """

    def __init__(self, work: Callable[[Shared, Item], Made], shared: Shared, processes: int = 0) -> None:
        self._work, self._shared = work, shared
        self._processes = processes or os.cpu_count() or 1
        self._pool: ProcessPoolExecutor | None = None

    def __enter__(self) -> "Composers[Shared, Item, Made]":
        if self._processes > 1:
            # forked from a clean server: the caller may have threads, which a plain fork would not survive
            context = get_context("forkserver")
            self._pool = ProcessPoolExecutor(self._processes, context, _begin, (self._work, self._shared))
        return self

    def __exit__(self, *_: object) -> None:
        if self._pool is not None:
            self._pool.shutdown(cancel_futures=True)
            self._pool = None

    def each(self, items: Iterable[Item]) -> Iterator[Made]:
        """What the work makes of each item, in order; the first error of the work is raised here and ends it."""
        if self._pool is None:
            yield from (self._work(self._shared, item) for item in items)
            return
        rest = iter(items)
        under_way: deque[Future[list[Made]]] = deque()
        while True:
            while len(under_way) < AHEAD * self._processes and (chunk := list(islice(rest, CHUNK))):
                under_way.append(self._pool.submit(_make, chunk))
            if not under_way:
                return
            yield from under_way.popleft().result()


def _begin(work: Callable[[Any, Any], Any], shared: Any) -> None:
    global _here
    _here = work, shared
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl-C is for the caller, who ends us
    Thread(target=_end_with_caller, daemon=True).start()
    gc.freeze()  # what is here stays; and what the work keeps of readers' digests holds no cycles
    gc.set_threshold(RARELY)


def _end_with_caller() -> None:
    """However it ends: a caller that was killed can tell nobody to stop."""
    caller = parent_process()
    if caller is not None:
        caller.join()
        os._exit(1)


def _make(chunk: Sequence[Any]) -> list[Any]:
    work, shared = _here
    return [work(shared, item) for item in chunk]
