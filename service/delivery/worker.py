"""Sends what is due in the outbox, as far as it can be sent now.

A group of rows is leased, composed, marked as `sending` in one commit, and only then given away, over a
few connections at a time, while the next group is made ready. Results are recorded in group commits.
A slow server makes the groups small, so that few rows are doubtful if the process dies.
"""

import asyncio
import logging
import os
import secrets
import socket
from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from datetime import datetime, timedelta
from typing import Any

from service.clock import Clock
from service.delivery.ledger import Ledger
from service.delivery.mime import content_hash
from service.delivery.sender import Answer, Mail, Outcome, Sender, Skip
from service.errors import MailDown, Refused, Unreachable
from service.settings import Settings
from service.store import leases, outbox
from service.store.base import Store
from service.store.leases import Job, Result

Compose = Callable[[Job], Mail | Skip]
Progress = Callable[[Mapping[str, int]], None]

COUNTED = ("sent", "deferred", "failed", "expired", "withdrawn", "skipped", "doubtful")
_FIRST_WAIT = timedelta(minutes=5)  # common practice, no source; greylisting servers want a few minutes
_LONGEST_WAIT = timedelta(hours=4)  # RFC 5321 section 4.5.4.1 asks for retries every two or three hours
_SPARE_S = 60.0  # a lease outlasts the longest conversation by this [s]
_QUICK_S, _SLOW_S = 0.25, 1.0  # a group that went faster makes the next one larger, one slower smaller [s]
_STATES = {
    Outcome.ACCEPTED: "sent",
    Outcome.LATER: "deferred",
    Outcome.REFUSED: "failed",
    Outcome.DOUBTFUL: "deferred",
}
_log = logging.getLogger(__name__)


def deliver(
    store: Store,
    sender: Sender,
    compose: Compose,
    clock: Clock,
    settings: Settings,
    progress: Progress | None = None,
) -> dict[str, int]:
    """Send until nothing more can be sent now; returns how many messages ended in which way.

    Parameters
    ----------
    store, sender, clock, settings
        Where the outbox is, what takes the mail, the time, and how to go about it.
    compose
        Makes the message of a job, or says why it is not sent any more. Called on a thread of its own,
        just before the row is marked as `sending`: here consent is looked at for the last time.
    progress
        Told the counts so far, after each commit.

    Raises
    ------
    MailDown
        Where the server does not answer; says how many messages stay queued. Nothing is lost.
    """
    return asyncio.run(_Run(store, sender, compose, clock, settings, progress).whole())


def retry_after(attempts: int) -> timedelta:
    """How long to wait after so many attempts: 5 minutes, then three times as long, up to 4 hours."""
    return min(_FIRST_WAIT * int(3 ** min(max(attempts, 1) - 1, 10)), _LONGEST_WAIT)


class _Run:
    """One run of the worker, from its first claim to its last commit."""

    def __init__(
        self,
        store: Store,
        sender: Sender,
        compose: Compose,
        clock: Clock,
        settings: Settings,
        progress: Progress | None,
    ) -> None:
        self._sender, self._compose, self._clock, self._progress = sender, compose, clock, progress
        self._settings = settings.delivery
        self._ledger = Ledger(store, clock, self._count)
        self._composer = ThreadPoolExecutor(1, "compose")
        self._counts = dict.fromkeys(COUNTED, 0)
        self._me = f"{socket.gethostname()}:{os.getpid()}:{secrets.token_hex(4)}"
        self._lease_s = sender.longest_s + _SPARE_S
        self._size = min(sender.connections, self._settings.batch)
        self._queue: asyncio.Queue[tuple[Job, Mail] | None] = asyncio.Queue(sender.connections)
        self._marked: dict[int, Job] = {}  # on record as `sending`, but not given away yet
        self._down: MailDown | None = None

    async def whole(self) -> dict[str, int]:
        try:
            waiting = await self._all_that_is_due()
        finally:
            self._composer.shutdown(cancel_futures=True)
            self._ledger.close()
        if self._down is not None:
            stays = f"{self._counts['sent']} messages were sent; {waiting} stay in the outbox for the next run"
            raise MailDown(f"{self._down}. {stays}") from self._down
        return self._counts

    # --- the parts of a run, in order -----------------------------------------------------------

    async def _all_that_is_due(self) -> int:
        """Send it; says how many messages wait in the outbox afterwards. Whatever happens, leases are put back."""
        try:
            await self._tidy()
            if jobs := await self._claim():
                await self._send_all(jobs)
        finally:
            waiting = await self._put_back()
        return waiting

    async def _tidy(self) -> None:
        """Take up what an earlier run left behind, and give up what has become too old."""
        found = await self._ledger.do(lambda c: leases.recover(c, self._clock.now(), self._settings.doubtful))
        self._counts["doubtful"] += found["doubtful"]
        self._counts["expired"] += await self._ledger.do(lambda c: outbox.expire(c, self._clock.now()))

    async def _send_all(self, jobs: list[Job]) -> None:
        try:
            await self._sender.open()
        except MailDown as error:
            self._down = error
            return
        try:
            async with asyncio.TaskGroup() as group:
                keeping = group.create_task(self._ledger.keep())
                renewing = group.create_task(self._renew())
                senders = [group.create_task(self._send()) for _ in range(self._sender.connections)]
                await self._feed(group, jobs)
                await asyncio.gather(*senders)
                await self._ledger.end()
                await keeping
                renewing.cancel()
        except BaseExceptionGroup as errors:
            raise errors.exceptions[0] from errors
        finally:
            await self._sender.close()

    async def _feed(self, group: asyncio.TaskGroup, jobs: list[Job]) -> None:
        """Keep the senders busy: while one group is given away, the next is made ready."""
        loop = asyncio.get_running_loop()
        ready = await self._ready(jobs)
        while ready:
            following = group.create_task(self._next())
            since = loop.time()
            for item in ready:
                await self._queue.put(item)
            self._pace(loop.time() - since)
            ready = await following
        for _ in range(self._sender.connections):
            await self._queue.put(None)

    async def _next(self) -> list[tuple[Job, Mail]]:
        while self._down is None and (jobs := await self._claim()):
            if ready := await self._ready(jobs):
                return ready
        return []

    async def _claim(self) -> list[Job]:
        def work(c: Any) -> list[Job]:
            return leases.claim(c, self._me, self._clock.now(), self._size, self._lease_s)

        return await self._ledger.do(work)

    async def _ready(self, jobs: Sequence[Job]) -> list[tuple[Job, Mail]]:
        """Compose a group and mark it as `sending`; returns what is still to be sent."""
        loop = asyncio.get_running_loop()
        made = await loop.run_in_executor(self._composer, lambda: [self._composed(job) for job in jobs])
        mails: list[tuple[Job, Mail, str]] = []
        for item in made:
            if isinstance(item, Result):
                await self._ledger.put(item)
            else:
                mails.append(item)
        ours = await self._ledger.do(lambda c: self._mark(c, mails))
        self._counts["withdrawn"] += len(mails) - len(ours)
        self._marked |= {job.id: job for job, _, _ in mails if job.id in ours}
        return [(job, mail) for job, mail, _ in mails if job.id in ours]

    async def _send(self) -> None:
        while (item := await self._queue.get()) is not None:
            job, mail = item
            if self._down is None:
                del self._marked[job.id]
                await self._ledger.put(await self._one(job, mail))

    async def _renew(self) -> None:
        while True:
            await asyncio.sleep(self._lease_s / 3)
            await self._ledger.do(lambda c: leases.renew(c, self._me, self._clock.now(), self._lease_end()))

    async def _put_back(self) -> int:
        """Return what was leased or marked and not given away; says how many messages wait."""
        unsent = [self._unsent(job) for job in self._marked.values()]

        def work(c: Any) -> dict[str, int]:
            leases.record(c, unsent, self._clock.now())
            leases.release(c, self._me, self._clock.now())
            self._counts["expired"] += outbox.expire(c, self._clock.now())
            return outbox.counts(c)

        by_state = await self._ledger.do(work)
        return sum(by_state[state] for state in outbox.WAITING)

    # --- one message ----------------------------------------------------------------------------

    def _composed(self, job: Job) -> tuple[Job, Mail, str] | Result:
        """A job's message, or what becomes of the job without one. A fault in one must not stop the rest."""
        try:
            made = self._compose(job)
        except Unreachable:
            raise
        except Refused as error:
            return Result(job, "failed", "not composed", str(error))
        except Exception as error:
            _log.exception("message %s could not be composed", job.message_id)
            due = self._clock.now() + retry_after(job.attempts + 1)
            return Result(job, "deferred", "not composed", type(error).__name__, due=due)
        if isinstance(made, Skip):
            return Result(job, "withdrawn", "skipped", made.reason)
        return job, made, content_hash(made.data)

    def _mark(self, c: Any, mails: Sequence[tuple[Job, Mail, str]]) -> set[int]:
        return leases.mark_sending(c, [(job, digest) for job, _, digest in mails], self._clock.now(), self._lease_end())

    async def _one(self, job: Job, mail: Mail) -> Result:
        try:
            return self._result(job, await self._sender.send(mail))
        except MailDown as error:
            self._down = error
            return self._unsent(job)

    def _result(self, job: Job, answer: Answer) -> Result:
        state = _STATES[answer.outcome]
        if answer.outcome is Outcome.DOUBTFUL and self._settings.doubtful == "hold":
            state = "sending"
        due = self._clock.now() + retry_after(job.attempts + 1) if state == "deferred" else None
        return Result(job, state, answer.outcome, answer.text, answer.code, due)

    def _unsent(self, job: Job) -> Result:
        return Result(job, "queued", "not sent", str(self._down or "the run ended before its turn"))

    # --- keeping count --------------------------------------------------------------------------

    def _count(self, results: Sequence[Result], ours: set[int]) -> None:
        for result in results:
            key = result.outcome if result.outcome in ("doubtful", "skipped") else result.state
            if result.job.id not in ours:
                _log.warning("the lease of message %s ran out before its answer came", result.job.message_id)
                key = "doubtful"
            if key in self._counts:
                self._counts[key] += 1
        if self._progress is not None:
            self._progress(dict(self._counts))

    def _pace(self, took_s: float) -> None:
        if took_s < _QUICK_S:
            self._size = min(self._size * 2, self._settings.batch)
        elif took_s > _SLOW_S:
            self._size = max(self._size // 2, 1)

    def _lease_end(self) -> datetime:
        return self._clock.now() + timedelta(seconds=self._lease_s)
