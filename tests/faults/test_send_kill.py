"""kill -9 while messages go out: all arrive, and a message is doubled only where its acceptance was not on record.

Each round starts a real process (forked from a small server that has everything imported), kills it at a
random moment, and looks at what the store holds. The SMTP server lives in this process and counts Message-IDs.
"""

import contextlib
import mmap
import multiprocessing
import random
import time
from collections import Counter
from collections.abc import Callable, Iterator
from datetime import datetime, timedelta
from pathlib import Path

from sqlalchemy import select

from service.delivery.maildir_server import LocalServer
from service.delivery.smtp import SmtpSender
from service.store.base import Store, metadata
from service.store.outbox import delivery, outbox
from tests.builders import NOW
from tests.faults.sending_child import COMMITTING, OPEN, STARTED, TRANSACTION, send_until_killed
from tests.service.delivery.outgoing import put, run, states
from tests.smtp_server import Inbox, mail_settings, serving

KILLS = 30
WAITING = 1500  # messages before each round: more than any process sends before it is killed
LONGEST_S = 0.2  # a child is killed at most so long after it started to send


def test_kill_9_loses_nothing_and_doubles_only_what_was_doubtful(store_url: str, tmp_path: Path) -> None:
    store = Store.open(store_url)
    metadata.create_all(store.engine)
    inbox, chance, moments = Inbox(), random.Random(20260512), Counter[int]()
    sent_once: dict[str, int] = {}
    with serving(inbox) as server:
        for kill in range(KILLS):
            _top_up(store)
            after_s = chance.uniform(0, LONGEST_S)
            moments[_killed(store_url, server.port, _round(kill), tmp_path / "flags", after_s)] += 1
            _quiet(server)
            arrived = inbox.message_ids
            for message_id in _recorded_sent(store) - sent_once.keys():
                sent_once[message_id] = arrived[message_id]
        run(store, SmtpSender(mail_settings(server)), at=_round(KILLS))
    arrived = inbox.message_ids
    doubled = {message_id: count - 1 for message_id, count in arrived.items() if count > 1}
    doubtful = _doubtful(store)
    said = f"{moments[OPEN]} inside a transaction, {moments[COMMITTING]} while one was committed"
    print(f"{store.engine.dialect.name}: {KILLS} kills, {said}; {len(arrived)} messages, {len(doubled)} doubled")  # noqa: T201
    assert moments[OPEN] > 0
    assert set(states(store)) == {"sent"}
    assert set(arrived) == _recorded_sent(store)  # nothing lost, and no other Message-ID was ever used
    assert all(arrived[message_id] == count for message_id, count in sent_once.items())
    assert all(extra <= doubtful[message_id] for message_id, extra in doubled.items())
    store.close()


def _top_up(store: Store) -> None:
    by_state = states(store)
    total = sum(by_state.values())
    missing = WAITING - (total - by_state.get("sent", 0))
    put(store, *(f"r{n}" for n in range(total, total + missing)))


def _round(number: int) -> datetime:
    """Each round is hours after the last, so that the leases of the killed have run out."""
    return NOW + timedelta(hours=2 * number)


def _killed(store_url: str, port: int, now: datetime, shared: Path, after_s: float) -> int:
    """Start a sender and kill it; where in a transaction it was at that moment."""
    with _flags(shared) as flags:
        context = multiprocessing.get_context("forkserver")
        context.set_forkserver_preload(["tests.faults.sending_child"])
        child = context.Process(target=send_until_killed, args=(store_url, port, now, shared))
        child.start()
        _until(lambda: bool(flags[STARTED]))
        time.sleep(after_s)
        child.kill()
        child.join()
        assert child.exitcode == -9
        child.close()
        return flags[TRANSACTION]


@contextlib.contextmanager
def _flags(shared: Path) -> Iterator[mmap.mmap]:
    shared.write_bytes(b"\0\0")
    with shared.open("r+b") as file, mmap.mmap(file.fileno(), 2) as flags:
        yield flags


def _quiet(server: LocalServer) -> None:
    """Wait until the server has read what the killed one had sent: then nothing is on its way any more."""
    _until(lambda: server.open_connections == 0)


def _until(done: Callable[[], bool]) -> None:
    end = time.monotonic() + 20
    while not done():
        assert time.monotonic() < end
        time.sleep(0.002)


def _recorded_sent(store: Store) -> set[str]:
    with store.reading() as c:
        return set(c.scalars(select(outbox.c.message_id).where(outbox.c.state == "sent")))


def _doubtful(store: Store) -> Counter[str]:
    """How many attempts at each message ended without an answer on record."""
    attempts = select(outbox.c.message_id).join(delivery).where(delivery.c.outcome == "doubtful")
    with store.reading() as c:
        return Counter(c.scalars(attempts))
