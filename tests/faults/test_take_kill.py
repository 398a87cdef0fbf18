"""Power fails while a file is taken: whenever it does, the store holds all of it or nothing of it.

A child process takes the file and is killed at a random moment, thirty times on each store. After each kill
the file is taken again to its end, and everything must equal a run that nobody disturbed.
"""

import mmap
import os
import random
import signal
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from sqlalchemy import Connection, delete, event, func, select

from service.intake.refusals import reasons_path
from service.store.base import Store, metadata
from service.store.observations import observation
from service.store.reportables import reportable_case
from tests.service.intake.network import row, settle, take, write

KILLS = 30
ROWS = 20_000
SEED = 20260512


@dataclass
class Outcome:
    """All that a take leaves behind."""

    rows: list[tuple[Any, ...]]
    cases: list[tuple[Any, ...]]
    rest: str | None
    reasons: str | None


def test_a_take_killed_at_any_moment_leaves_all_or_nothing(store_url: str, tmp_path: Path) -> None:
    store = Store.open(store_url)
    metadata.create_all(store.engine)
    settle(store)
    path, rest = _file(tmp_path), tmp_path / "rest.csv"
    inside = mmap.mmap(-1, 1)  # shared with the child: 1 while it is in a write transaction
    took_s = _time(lambda: _child(store_url, path, rest, inside))
    untouched = _outcome(store, rest)
    assert len(untouched.rows) == ROWS
    random_moment = random.Random(SEED)
    kills = within = 0
    while kills < KILLS:
        _empty(store, rest)
        if not _killed(lambda: _run(store_url, path, rest, inside), random_moment.uniform(0, took_s)):
            continue
        kills += 1
        within += inside[0]
        _all_or_nothing(_outcome(store, rest), untouched)
        take(store, path, keep_good=rest)
        assert _outcome(store, rest) == untouched
    store.close()
    print(f"{within} of {kills} kills fell inside a write transaction of {store.engine.dialect.name}")  # noqa: T201
    assert within > 0, "no kill fell inside a write transaction: the test says nothing"


def _file(folder: Path) -> Path:
    """Good rows, one that is refused, and one that names a listed pest."""
    rows = [row(record_id=f"{n * 7919 % ROWS:06d}", note=f"row {n}") for n in range(ROWS)]
    rows += [row(record_id="bad", day="2026-02-30", note=""), row(record_id="closed", pest="ghost beetle", note="")]
    return write(folder, rows)


# --- the child ---------------------------------------------------------------------------------


def _child(url: str, path: Path, rest: Path, inside: mmap.mmap) -> None:
    """Take the file in a child process, to its end."""
    pid = _fork(lambda: _run(url, path, rest, inside))
    assert os.waitstatus_to_exitcode(os.waitpid(pid, 0)[1]) == 0


def _killed(body: Callable[[], None], after_s: float) -> bool:
    """Run a body in a child and kill it after a while; False if it had ended by then."""
    pid = _fork(body)
    time.sleep(after_s)
    os.kill(pid, signal.SIGKILL)
    return os.waitstatus_to_exitcode(os.waitpid(pid, 0)[1]) == -signal.SIGKILL


def _fork(body: Callable[[], None]) -> int:
    """A child that starts with all modules loaded, so that its time goes into the take."""
    pid = os.fork()
    if pid:
        return pid
    try:
        body()
        os._exit(0)
    finally:
        os._exit(1)


def _run(url: str, path: Path, rest: Path, inside: mmap.mmap) -> None:
    inside[0] = 0
    store = Store.open(url)  # an engine of its own: a connection can't be shared by two processes

    @event.listens_for(store.engine, "begin")
    def _begun(connection: Connection) -> None:
        inside[0] = int(bool(connection.get_execution_options().get("leafturn_write")))

    @event.listens_for(store.engine, "commit")
    def _ended(connection: Connection) -> None:
        inside[0] = 0

    take(store, path, keep_good=rest)


def _time(body: Callable[[], None]) -> float:
    start = time.perf_counter()
    body()
    return time.perf_counter() - start


# --- what is left ------------------------------------------------------------------------------


def _outcome(store: Store, rest: Path) -> Outcome:
    with store.reading() as c:
        rows = [tuple(found) for found in c.execute(select(observation).order_by(observation.c.key))]
        cases = [tuple(found) for found in c.execute(select(reportable_case))]
    return Outcome(rows, [case[:2] + case[3:] for case in cases], _text(rest), _text(reasons_path(rest)))


def _text(path: Path) -> str | None:
    return path.read_text() if path.exists() else None


def _all_or_nothing(found: Outcome, untouched: Outcome) -> None:
    assert found.rows in ([], untouched.rows)
    assert found.cases in ([], untouched.cases)
    assert found.rest in (None, untouched.rest)
    assert found.reasons in (None, untouched.reasons)
    if found.rows:  # the rows count as taken only when those to mend are on the disk
        assert (found.rest, found.reasons) == (untouched.rest, untouched.reasons)


def _empty(store: Store, rest: Path) -> None:
    with store.writing() as c:
        c.execute(delete(observation))
        c.execute(delete(reportable_case))
        assert c.scalar(select(func.count()).select_from(observation)) == 0
    for path in (rest, reasons_path(rest)):
        path.unlink(missing_ok=True)
