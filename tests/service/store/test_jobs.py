"""Claims on both stores: one run for a job, a district and a day, and no late finish of a lost claim."""

from datetime import date, timedelta
from threading import Barrier, Thread

from service.store import jobs
from service.store.base import Store
from tests.builders import NOW

DUE = date(2026, 5, 12)
HOUR = timedelta(hours=1)


def claimed(store: Store, at=NOW, **changes):
    with store.writing() as c:
        return jobs.claim(c, "draft", "north", DUE, now=at, lasts=HOUR, **changes)


def test_a_run_is_claimed_once_and_another_day_or_district_apart(store: Store) -> None:
    first = claimed(store)
    assert first is not None
    assert (first.attempt, first.state, first.expires_at) == (1, "running", NOW + HOUR)
    assert claimed(store, NOW + timedelta(minutes=59)) is None
    with store.writing() as c:
        assert jobs.claim(c, "draft", "south", DUE, now=NOW, lasts=HOUR) is not None
        assert jobs.claim(c, "draft", "north", DUE + timedelta(days=1), now=NOW, lasts=HOUR) is not None
        assert jobs.claim(c, "send", "north", DUE, now=NOW, lasts=HOUR) is not None


def test_what_is_done_stays_done_unless_asked_for_again(store: Store) -> None:
    run = claimed(store)
    with store.writing() as c:
        assert jobs.finish(c, run, now=NOW + timedelta(minutes=1), summary={"signals": 7})
    assert claimed(store, NOW + timedelta(days=3)) is None
    with store.reading() as c:
        done = jobs.get(c, "draft", "north", DUE)
    assert (done.state, done.summary, done.finished_at) == ("done", {"signals": 7}, NOW + timedelta(minutes=1))
    repeated = claimed(store, NOW + HOUR, again=True)
    assert (repeated.attempt, repeated.state, repeated.finished_at) == (2, "running", None)
    assert claimed(store, NOW + HOUR, again=True) is None


def test_a_failed_run_may_be_claimed_at_once(store: Store) -> None:
    run = claimed(store)
    with store.writing() as c:
        assert jobs.finish(c, run, now=NOW, summary={"error": "mail server did not answer"}, failed=True)
    assert claimed(store).attempt == 2


def test_an_expired_claim_is_taken_over_and_its_first_holder_can_not_finish_it(store: Store) -> None:
    lost = claimed(store)
    taken = claimed(store, NOW + HOUR)
    assert taken.attempt == 2
    with store.writing() as c:
        assert not jobs.finish(c, lost, now=NOW + 2 * HOUR, summary={"signals": 1})
        assert jobs.finish(c, taken, now=NOW + 2 * HOUR, summary={"signals": 2})
        assert not jobs.finish(c, taken, now=NOW + 2 * HOUR, summary={"signals": 3})
        assert [run.summary for run in jobs.runs(c, "north", DUE)] == [{"signals": 2}]
        assert jobs.runs(c, "north", DUE + timedelta(days=1)) == []


def test_of_many_at_once_exactly_one_gets_the_claim(store: Store) -> None:
    start, got = Barrier(6), []

    def race() -> None:
        start.wait()
        got.append(claimed(store))

    threads = [Thread(target=race) for _ in range(6)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(got) == 6
    assert sum(run is not None for run in got) == 1
