"""The worker on both stores: what it sends, what it leaves, and what it says about it."""

import asyncio
import threading
from collections.abc import Mapping
from datetime import timedelta

import pytest
from sqlalchemy import select

from service.clock import SetClock
from service.delivery.mime import content_hash
from service.delivery.sender import Answer, Mail, Outcome, Skip
from service.delivery.worker import COUNTED, deliver, retry_after
from service.errors import Refused, StoreDown
from service.settings import Settings
from service.store import outbox
from service.store.base import Store
from service.store.leases import Job
from tests.builders import NOW
from tests.service.delivery.outgoing import composed, history, put, run, states


class Accepts:
    """A sender that accepts everything, after a turn of the event loop."""

    connections = 4
    longest_s = 10.0

    def __init__(self) -> None:
        self.mails: list[Mail] = []

    async def open(self) -> None:
        self.opened = True

    async def send(self, mail: Mail) -> Answer:
        await asyncio.sleep(0)
        self.mails.append(mail)
        return Answer(Outcome.ACCEPTED, "kept", 250)

    async def close(self) -> None:
        self.opened = False


def test_all_counts_are_named_even_where_nothing_happens(store: Store) -> None:
    put(store)
    assert deliver(store, Accepts(), composed, SetClock(NOW), Settings()) == dict.fromkeys(COUNTED, 0)


def test_progress_is_told_and_only_rises(store: Store) -> None:
    put(store, *(f"r{n}" for n in range(200)))
    told: list[Mapping[str, int]] = []
    deliver(store, Accepts(), composed, SetClock(NOW), Settings(), told.append)
    sent = [counts["sent"] for counts in told]
    assert sent == sorted(sent)
    assert sent[-1] == 200


def test_results_share_commits_and_each_is_sent_once(store: Store) -> None:
    put(store, *(f"r{n}" for n in range(200)))
    sender, told = Accepts(), []
    deliver(store, sender, composed, SetClock(NOW), Settings(), told.append)
    assert len({mail.recipient for mail in sender.mails}) == len(sender.mails) == 200
    assert len(told) < 100


def test_a_reader_who_has_left_meanwhile_gets_nothing(store: Store) -> None:
    put(store, "r1", "gone", "r2")
    sender = Accepts()
    skip = Skip("left on 2026-05-12")
    assert run(store, sender, compose=lambda job: skip if job.key == "gone" else composed(job)) == {
        "sent": 2,
        "skipped": 1,
    }
    assert "gone@example.org" not in {mail.recipient for mail in sender.mails}
    assert states(store) == {"sent": 2, "withdrawn": 1}
    with store.reading() as c:
        said = select(outbox.outbox.c.last_answer).where(outbox.outbox.c.key == "gone")
        assert c.scalar(said) == "left on 2026-05-12"


def test_compose_runs_off_the_event_loop_and_outside_the_stores_thread(store: Store) -> None:
    put(store, "r1")
    names: list[str] = []

    def watched(job: Job) -> Mail:
        names.append(threading.current_thread().name)
        with store.reading() as c:  # consent is looked up here
            assert outbox.counts(c)["leased"] == 1
        return composed(job)

    run(store, Accepts(), compose=watched)
    assert names == ["compose_0"]


def test_what_can_not_be_composed_fails_alone_and_says_why(store: Store) -> None:
    put(store, "r1", "bad", "broken")

    def some(job: Job) -> Mail:
        if job.key == "bad":
            raise Refused("no such address")
        if job.key == "broken":
            raise KeyError("statement")
        return composed(job)

    assert run(store, Accepts(), compose=some) == {"sent": 1, "failed": 1, "deferred": 1}
    assert history(store, "bad") == []  # it was never offered to a server
    assert run(store, Accepts(), at=NOW + timedelta(minutes=5)) == {"sent": 1}


def test_a_store_that_goes_away_while_composing_ends_the_run_and_leases_nothing(store: Store) -> None:
    put(store, "r1", "r2")

    def no_store(_: Job) -> Mail:
        raise StoreDown("gone")

    with pytest.raises(StoreDown):
        run(store, Accepts(), compose=no_store)
    assert states(store) == {"queued": 2}


def test_a_fault_in_the_sender_gives_back_what_it_was_not_given(store: Store) -> None:
    class Breaks(Accepts):
        connections = 1

        async def send(self, mail: Mail) -> Answer:
            if len(self.mails) == 3:
                raise RuntimeError("a fault of ours")
            return await super().send(mail)

    put(store, *(f"r{n}" for n in range(10)))
    sender = Breaks()
    with pytest.raises(RuntimeError, match="a fault of ours"):
        run(store, sender)
    assert not sender.opened
    assert states(store) == {"sent": 3, "sending": 1, "queued": 6}  # only the one in its hands is doubtful


def test_a_row_withdrawn_while_it_is_composed_is_not_sent(store: Store) -> None:
    put(store, "r1")

    def withdrawn_meanwhile(job: Job) -> Mail:
        with store.writing() as c:
            c.execute(outbox.outbox.update().values(state="withdrawn"))
        return composed(job)

    sender = Accepts()
    assert run(store, sender, compose=withdrawn_meanwhile) == {"withdrawn": 1}
    assert sender.mails == []


def test_a_lease_outlasts_the_longest_conversation_and_is_renewed(store: Store) -> None:
    put(store, "r1")
    ends: list[object] = []

    class Slow(Accepts):
        longest_s = -59.7  # with a minute to spare, a lease of 0.3 s, renewed every 0.1 s

        async def send(self, mail: Mail) -> Answer:
            for step in range(2):
                clock.set(NOW + step * timedelta(seconds=0.1))
                await asyncio.sleep(0.25)
                with store.reading() as c:
                    ends.append(c.scalar(select(outbox.outbox.c.lease_until)))
            return await super().send(mail)

    clock = SetClock(NOW)
    deliver(store, Slow(), composed, clock, Settings())
    assert ends == [NOW + timedelta(seconds=0.3), NOW + timedelta(seconds=0.4)]


def test_the_hash_of_what_was_sent_is_kept_and_no_body(store: Store) -> None:
    put(store, "r1")
    sender = Accepts()
    run(store, sender)
    with store.reading() as c:
        row = c.execute(select(outbox.outbox)).one()
    assert row.mime_hash == content_hash(sender.mails[0].data)
    assert not any("canola" in str(value) for value in row)


def test_waits_grow_threefold_up_to_four_hours() -> None:
    waits = [retry_after(attempts).total_seconds() / 60 for attempts in (1, 2, 3, 4, 5, 6, 1000)]
    assert waits == [5, 15, 45, 135, 240, 240, 240]  # 5 min × 3^(n−1), cut at 4 h: by hand
