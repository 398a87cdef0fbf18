"""Power fails while an edition is signed: whenever it does, nothing can leave, and signing again makes all right.

A child process signs and is killed just before its first commit, its second, and so on to its last. After each
kill nothing may be claimed for sending, and the edition, signed to its end, must equal one that nobody disturbed.
"""

import os
import signal
from datetime import timedelta
from itertools import count
from pathlib import Path
from typing import Any

import pytest
from sqlalchemy import delete, event, select, update

from service import pipeline
from service.clock import SetClock
from service.settings import MailSettings, Settings
from service.store import editions, leases, network, outbox
from service.store.base import Store
from tests import small_network
from tests.builders import a_subscriber

ID = "north-2026-W20"
READERS = 40
NOTE = "Fog on the north side."


def test_a_signing_killed_at_any_moment_lets_nothing_go(
    store: Store, store_url: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(editions, "PIECE", 8)  # many pieces, as with many readers
    settings = Settings(data_dir=str(tmp_path), keys_file=str(tmp_path / "keys"))
    small_network.fill(store)
    with store.writing() as c:
        network.save_subscribers(c, [a_subscriber(f"t{i}") for i in range(READERS - 7)])
    pipeline.draft(store, "north", clock=SetClock(small_network.CUT_OFF))
    _sign(store, settings)
    undisturbed = _kept(store)
    assert len(undisturbed["outbox"]) == READERS
    written = []
    _unsign(store)
    while _killed(store_url, settings, before=len(written) + 1):
        written.append(_nothing_leaves(store))
        _sign(store, settings)
        assert _kept(store) == undisturbed
        _unsign(store)
    assert _kept(store) == undisturbed  # the last was not killed
    assert set(range(0, READERS + 1, editions.PIECE)) <= set(written), "no kill between some two pieces"
    _each_reader_gets_one_mail(store, settings, tmp_path / "mail")


def _sign(store: Store, settings: Settings) -> None:
    pipeline.sign(store, settings, ID, by="ivy", clock=SetClock(small_network.CUT_OFF), note=NOTE)


def _killed(url: str, settings: Settings, before: int) -> bool:
    """Sign in a child that ends as if by a power cut before that commit; False if it had fewer to do."""
    pid = os.fork()
    if pid:
        return os.waitstatus_to_exitcode(os.waitpid(pid, 0)[1]) == -signal.SIGKILL
    commits = count(1)
    try:
        store = Store.open(url)  # an engine of its own: two processes can't share a connection

        @event.listens_for(store.engine, "commit")
        def _about_to(_connection: object) -> None:
            if next(commits) == before:
                os.kill(os.getpid(), signal.SIGKILL)

        _sign(store, settings)
    finally:
        os._exit(0)


def _nothing_leaves(store: Store) -> int:
    """No worker may claim a row; says how many there are."""
    later = small_network.CUT_OFF + timedelta(hours=1)
    with store.writing() as c:
        assert leases.claim(c, "a worker", later, 100, 60.0) == []
        return sum(outbox.counts(c, ID).values())


def _kept(store: Store) -> dict[str, Any]:
    """All of a signed edition that must not depend on how its signing went."""
    out, slip = outbox.outbox.c, editions.slip.c
    with store.reading() as c:
        rows = c.execute(select(out.key, out.message_id, out.state, out.attempts).order_by(out.key)).all()
        slips = c.execute(select(slip.subscriber, slip.body, slip.canonical_hash).order_by(slip.subscriber)).all()
        return {"edition": editions.get(c, ID), "outbox": list(map(tuple, rows)), "slips": list(map(tuple, slips))}


def _unsign(store: Store) -> None:
    with store.writing() as c:
        c.execute(delete(outbox.outbox))
        c.execute(update(editions.slip).values(canonical_hash=None))
        c.execute(update(editions.edition).values(state="draft", signed_by=None, signed_at=None))


def _each_reader_gets_one_mail(store: Store, settings: Settings, folder: Path) -> None:
    with pipeline.mail_server(folder) as server:
        mail = MailSettings(port=server.port, starttls="never")
        counts = pipeline.send(
            store, settings.model_copy(update={"mail": mail}), ID, clock=SetClock(small_network.CUT_OFF)
        )
    assert (counts["sent"], counts["still_to_send"]) == (READERS, 0)
    assert len(list((folder / "new").iterdir())) == READERS
