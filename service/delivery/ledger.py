"""The one thread that writes to the outbox while messages go out.

Results wait for each other a moment, so that many share a commit: at most 20 ms, at most 64.
"""

import asyncio
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import Any, TypeVar

from service.clock import Clock
from service.errors import StoreBusy
from service.store import leases
from service.store.base import Store
from service.store.leases import Result, Work

T = TypeVar("T")

TOGETHER_S = 0.02  # longest that a result waits for others [s]
TOGETHER = 64  # most results in one commit
_TRIES = 5  # each waits as long as the store's own time-out


class Ledger:
    """Runs store work on a thread of its own, and gathers results into group commits.

    `recorded` is told each group after its commit, with the ids that were still ours to record.
    """

    def __init__(self, store: Store, clock: Clock, recorded: Callable[[Sequence[Result], set[int]], None]) -> None:
        self._store, self._clock, self._recorded = store, clock, recorded
        self._thread = ThreadPoolExecutor(1, "outbox")
        self._results: asyncio.Queue[Result | None] = asyncio.Queue(TOGETHER)
        self._group: list[Result] = []
        self._left: list[Result] = []

    async def do(self, work: Work[T]) -> T:
        """Do one piece of work in a transaction of its own; it is durable when this returns."""
        return await asyncio.get_running_loop().run_in_executor(self._thread, self._in_transaction, work)

    async def put(self, result: Result) -> None:
        """Have a result recorded with the next group; waits where the store can't keep up."""
        try:
            await self._results.put(result)
        except asyncio.CancelledError:
            self._left.append(result)  # an answer that has come is never thrown away
            raise

    async def end(self) -> None:
        """Say that no more results will come; `keep` returns once all are durable."""
        await self._results.put(None)

    async def keep(self) -> None:
        """Record results as they come, group by group."""
        more = True
        while more:
            more = await self._gather()
            if self._group:
                self._recorded(self._group, await self.do(self._record_group))
            self._group = []

    def close(self) -> None:
        """Record what is left, then let the thread go. What is on record already stays as it is."""
        self._group += self._left
        while not self._results.empty():
            if (result := self._results.get_nowait()) is not None:
                self._group.append(result)
        try:
            if self._group:
                self._recorded(self._group, self._thread.submit(self._in_transaction, self._record_group).result())
        finally:
            self._thread.shutdown()

    def _record_group(self, c: Any) -> set[int]:
        return leases.record(c, self._group, self._clock.now())

    async def _gather(self) -> bool:
        """Take results until the group is full or has waited long enough; False after the last."""
        loop = asyncio.get_running_loop()
        until = None
        while len(self._group) < TOGETHER:
            left = None if until is None else until - loop.time()
            try:
                result = await asyncio.wait_for(self._results.get(), left)
            except TimeoutError:
                break
            if result is None:
                return False
            self._group.append(result)
            until = until or loop.time() + TOGETHER_S
        return True

    def _in_transaction(self, work: Work[T]) -> T:
        """An accepted message must not be sent again only because another writer was slow: wait longer."""
        for _ in range(_TRIES - 1):
            try:
                with self._store.writing() as c:
                    return work(c)
            except StoreBusy:
                continue
        with self._store.writing() as c:
            return work(c)
