"""The outbox on both stores: what may be claimed, by whom, and what each step may change."""

import random
from collections import Counter
from datetime import datetime, timedelta
from typing import Any

import pytest
from sqlalchemy import select

from rules.slip import Edition
from service.store import editions, leases, outbox
from service.store.base import Store, micros
from service.store.leases import Job, Result
from tests.builders import NOW
from tests.service.delivery.outgoing import a_message, history, put, states
from tests.service.editions import cast

LEASE_S = 600.0
LATER = NOW + timedelta(seconds=LEASE_S)
MAY_BECOME = {
    "queued": {"leased", "expired", "withdrawn"},
    "deferred": {"leased", "expired", "withdrawn"},
    "leased": {"queued", "sending", "withdrawn", "failed", "deferred"},
    "sending": {"sent", "deferred", "failed", "queued", "sending"},
}


def claim(store: Store, worker: str = "a", now: datetime = NOW, n: int = 10) -> list[Job]:
    with store.writing() as c:
        return leases.claim(c, worker, now, n, LEASE_S)


def mark(store: Store, jobs: list[Job], now: datetime = NOW) -> set[int]:
    with store.writing() as c:
        return leases.mark_sending(c, [(job, "hash") for job in jobs], now, now + timedelta(seconds=LEASE_S))


def record(store: Store, job: Job, state: str, now: datetime = NOW, **values: Any) -> bool:
    with store.writing() as c:
        return job.id in leases.record(c, [Result(job, state, "outcome", "said", **values)], now)


def an_edition(store: Store, id: str, state: str) -> None:
    """An edition without readers, signed, and sent if that is asked for."""
    with store.writing() as c:
        editions.save_draft(c, Edition(id, "north", "2026-W20", NOW, NOW, "ivy", cast.HEAD), [], [], [])
        editions.mark_signed(c, id, by="ivy", at=NOW)
        if state == "sent":
            editions.mark_sent(c, id, by="ivy", at=NOW)


def test_a_message_is_written_once_whatever_happens(store: Store) -> None:
    put(store, "r1")
    with store.writing() as c:
        rows = [a_message("r1"), a_message("r2"), a_message("r1", kind="correction")]
        assert outbox.enqueue(c, rows, NOW) == 2
        assert outbox.enqueue(c, rows, NOW) == 0
    assert states(store) == {"queued": 3}


def test_many_messages_are_written_in_pieces(store: Store) -> None:
    put(store, *(f"r{n}" for n in range(2 * outbox.PIECE + 1)))
    assert states(store) == {"queued": 2 * outbox.PIECE + 1}


def test_the_message_id_never_changes() -> None:
    first = outbox.message_id("edition", "north-2026-W20:s1", "leafturn.example")
    assert first == outbox.message_id("edition", "north-2026-W20:s1", "leafturn.example")
    assert first != outbox.message_id("correction", "north-2026-W20:s1", "leafturn.example")
    assert first.startswith("<")
    assert first.endswith("@leafturn.example>")


def test_a_row_belongs_to_one_worker_until_its_lease_ends(store: Store) -> None:
    put(store, "r1")
    [job] = claim(store, "a")
    assert (job.subscriber, job.attempts, job.message_id) == ("r1", 0, a_message("r1").message_id)
    assert claim(store, "b") == []
    with store.writing() as c:
        assert leases.recover(c, LATER - timedelta(seconds=1)) == {"returned": 0, "doubtful": 0}
        assert leases.recover(c, LATER) == {"returned": 1, "doubtful": 0}
    [again] = claim(store, "b", LATER)
    assert again.fence == job.fence + 1


def test_a_renewed_lease_lasts_longer(store: Store) -> None:
    put(store, "r1")
    claim(store, "a")
    with store.writing() as c:
        assert leases.renew(c, "b", NOW, LATER + timedelta(hours=1)) == 0
        assert leases.renew(c, "a", NOW, LATER + timedelta(hours=1)) == 1
        assert leases.recover(c, LATER + timedelta(minutes=59)) == {"returned": 0, "doubtful": 0}
        assert leases.renew(c, "a", LATER + timedelta(hours=1), LATER + timedelta(days=1)) == 0
        assert leases.recover(c, LATER + timedelta(hours=1)) == {"returned": 1, "doubtful": 0}


def test_an_older_fence_can_change_nothing(store: Store) -> None:
    put(store, "r1")
    [old] = claim(store, "a")
    with store.writing() as c:
        leases.recover(c, LATER)
    [new] = claim(store, "b", LATER)
    assert mark(store, [old], LATER) == set()
    assert mark(store, [new], LATER) == {new.id}
    assert not record(store, old, "failed", LATER)
    assert record(store, new, "sent", LATER)
    assert not record(store, new, "failed", LATER)
    assert states(store) == {"sent": 1}


def test_only_what_was_being_sent_is_doubtful(store: Store) -> None:
    put(store, "r1", "r2", "r3")
    first, _ = claim(store, n=2)
    mark(store, [first])
    with store.writing() as c:
        assert leases.recover(c, LATER, "hold") == {"returned": 1, "doubtful": 1}
    assert states(store) == {"queued": 2, "sending": 1}
    with store.writing() as c:
        assert leases.recover(c, LATER, "retry") == {"returned": 0, "doubtful": 1}
    assert states(store) == {"queued": 3}
    assert history(store, first.key) == [("doubtful", None)]
    assert {job.message_id for job in claim(store, now=LATER)} == {a_message(k).message_id for k in ("r1", "r2", "r3")}


def test_rows_wait_for_their_time_and_for_their_edition(store: Store) -> None:
    put(store, "notice")
    an_edition(store, "W20", "signed")
    with store.writing() as c:
        in_edition = a_message("s1", kind="edition", edition="W20")
        outbox.enqueue(c, [in_edition, a_message("late", due=NOW + timedelta(hours=1))], NOW)
    assert [job.key for job in claim(store)] == ["notice"]
    with store.writing() as c:
        editions.mark_sent(c, "W20", by="ivy", at=NOW)
    assert [(job.key, job.edition) for job in claim(store)] == [("s1", "W20")]
    assert [job.key for job in claim(store, now=NOW + timedelta(hours=1))] == ["late"]


def test_rows_come_in_the_order_of_their_time(store: Store) -> None:
    put(store)
    with store.writing() as c:
        minutes = [7, 3, 9, 1, 5]
        rows = [a_message(f"m{minute}", due=NOW - timedelta(minutes=minute)) for minute in minutes]
        outbox.enqueue(c, rows, NOW)
    assert [job.key for job in claim(store, n=3)] == ["m9", "m7", "m5"]


def test_an_expired_row_is_given_up_and_never_claimed(store: Store) -> None:
    put(store, "r1")
    end = a_message().expires_at
    assert claim(store, now=end) == []
    with store.writing() as c:
        assert outbox.expire(c, end - timedelta(seconds=1)) == 0
        assert outbox.expire(c, end) == 1
    assert states(store) == {"expired": 1}


def test_an_edition_is_withdrawn_as_far_as_it_is_not_under_way(store: Store) -> None:
    put(store, "notice")
    an_edition(store, "W20", "sent")
    with store.writing() as c:
        outbox.enqueue(c, [a_message(f"s{n}", kind="edition", edition="W20") for n in range(4)], NOW)
    _, sending, leased = claim(store, n=3)
    mark(store, [sending])
    with store.writing() as c:
        assert outbox.withdraw(c, "W20", NOW) == 3
        assert outbox.counts(c, "W20") == dict.fromkeys(outbox.STATES, 0) | {"withdrawn": 3, "sending": 1}
    assert mark(store, [leased]) == set()
    assert record(store, sending, "sent")


def test_released_rows_are_free_at_once(store: Store) -> None:
    put(store, "r1", "r2")
    sending, _ = claim(store, "a")
    mark(store, [sending])
    with store.writing() as c:
        assert leases.release(c, "a", NOW) == 1
    assert states(store) == {"queued": 1, "sending": 1}


def test_a_long_answer_is_cut_and_every_attempt_is_kept(store: Store) -> None:
    put(store, "r1")
    for attempt in range(2):
        now = NOW + attempt * timedelta(hours=1)
        [job] = claim(store, now=now)
        mark(store, [job], now)
        with store.writing() as c:
            leases.record(c, [Result(job, "deferred", "later", "x" * 1000, 451, now + timedelta(minutes=5))], now)
    with store.reading() as c:
        tried = outbox.attempts(c, "notice", "r1")
        row = c.execute(select(outbox.outbox)).one()
    assert [(a.attempt, a.code, len(a.answer)) for a in tried] == [(1, 451, 300), (2, 451, 300)]
    assert (row.attempts, len(row.last_answer), row.mime_hash) == (2, 300, "hash")


def test_two_claims_at_once_never_meet(store: Store) -> None:
    """On PostgreSQL the second skips what the first has locked; on SQLite there is one writer at a time."""
    if store.is_sqlite:
        put(store, *"abcd")
        jobs = claim(store, "a", n=2) + claim(store, "b", n=2)
    else:
        put(store, *"abcd")
        with store.writing() as first, store.writing() as second:
            jobs = leases.claim(first, "a", NOW, 2, LEASE_S) + leases.claim(second, "b", NOW, 4, LEASE_S)
    assert Counter(job.key for job in jobs) == Counter("abcd")


@pytest.mark.parametrize("source", [None, "W20"])
def test_a_claim_looks_at_no_more_than_it_takes(store: Store, source: str | None) -> None:
    """The claim's query runs through the partial index alone, without sorting."""
    put(store, *(f"r{n}" for n in range(50)))
    query = leases._due_rows(source, NOW, 10).compile(store.engine, compile_kwargs={"render_postcompile": True})
    prefix = "EXPLAIN QUERY PLAN " if store.is_sqlite else "EXPLAIN "
    with store.writing() as c:
        leases._in_index_order(c)
        plan = " ".join(str(row) for row in c.exec_driver_sql(prefix + str(query), _bound(store, query.params)))
    assert "ix_outbox_waiting" in plan
    assert "Sort" not in plan
    assert "TEMP B-TREE" not in plan


def _bound(store: Store, values: dict[str, Any]) -> Any:
    stored = {name: (micros(v) if isinstance(v, datetime) else v) for name, v in values.items()}
    return tuple(stored.values()) if store.is_sqlite else stored


@pytest.mark.parametrize("seed", range(4))
def test_no_order_of_steps_leads_out_of_the_drawn_states(store: Store, seed: int) -> None:
    """Two workers do their steps in any order, some die, time passes: each change is one that may be."""
    chance = random.Random(seed)
    put(store, *(f"r{n}" for n in range(6)))
    walk = _Walk(store, chance)
    before = walk.look()
    sent: set[int] = set()
    for _ in range(60):
        step = chance.choice(["claim", "claim", "mark", "mark", "record", "record", "die", "recover", "expire"])
        getattr(walk, step)()
        after = walk.look()
        changed = {id: (before[id], state) for id, state in after.items() if before[id] != state}
        assert all(new in MAY_BECOME.get(old, set()) for old, new in changed.values()), (step, changed)
        sent |= {id for id, state in after.items() if state == "sent"}
        assert all(after[id] == "sent" for id in sent)
        before = after


class _Walk:
    """Two workers, the rows that each believes it holds, and a clock."""

    def __init__(self, store: Store, chance: random.Random) -> None:
        self.store, self.chance, self.now = store, chance, NOW
        self.held: dict[str, list[Job]] = {"a": [], "b": []}

    def look(self) -> dict[int, str]:
        with self.store.reading() as c:
            return {row.id: row.state for row in c.execute(select(outbox.outbox.c.id, outbox.outbox.c.state))}

    def claim(self) -> None:
        worker = self.chance.choice("ab")
        self.held[worker] += claim(self.store, worker, self.now, self.chance.randint(1, 3))

    def mark(self) -> None:
        mark(self.store, self.held[self.chance.choice("ab")], self.now)

    def record(self) -> None:
        worker = self.chance.choice("ab")
        if self.held[worker]:
            job = self.held[worker].pop(self.chance.randrange(len(self.held[worker])))
            sending = self.look()[job.id] == "sending"
            state = self.chance.choice(["sent", "deferred", "failed", "queued"] if sending else ["withdrawn", "queued"])
            record(self.store, job, state, self.now, due=self.now + timedelta(minutes=5))

    def die(self) -> None:
        self.held[self.chance.choice("ab")].clear()

    def recover(self) -> None:
        self.now += timedelta(seconds=self.chance.choice([60, LEASE_S, LEASE_S * 2]))
        with self.store.writing() as c:
            leases.recover(c, self.now, self.chance.choice(["retry", "hold"]))

    def expire(self) -> None:
        self.now += timedelta(hours=self.chance.choice([0, 1, 12]))
        with self.store.writing() as c:
            outbox.expire(c, self.now)
