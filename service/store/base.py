"""The ground under every table: naming, column types, engines and the two kinds of transaction.

SQLite and PostgreSQL hold the same rows. Times are whole microseconds since 1970 in UTC, so that they
compare, index and round-trip alike on both; local days are dates.

Reading and writing never mix: `Store.reading()` gives a snapshot, `Store.writing()` the one write lock
(BEGIN IMMEDIATE on SQLite). No network or rendering work belongs inside either.
"""

import fcntl
import os
import sqlite3
import time
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

from sqlalchemy import URL, BigInteger, Connection, Dialect, Engine, MetaData, create_engine, event, make_url
from sqlalchemy.exc import ArgumentError, DBAPIError, IntegrityError, OperationalError
from sqlalchemy.types import TypeDecorator

from service.errors import StoreBusy, StoreDown, Unreachable

metadata = MetaData(
    naming_convention={
        "ix": "ix_%(column_0_N_label)s",
        "uq": "uq_%(table_name)s_%(column_0_N_name)s",
        "ck": "ck_%(table_name)s_%(constraint_name)s",
        "fk": "fk_%(table_name)s_%(column_0_N_name)s_%(referred_table_name)s",
        "pk": "pk_%(table_name)s",
    }
)

EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_ARRIVALS = 5_190_443  # any fixed number: the name of PostgreSQL's lock on taking rows in
_MICROSECOND = timedelta(microseconds=1)


def micros(at: datetime) -> int:
    """An aware time as the store holds it."""
    return (at - EPOCH) // _MICROSECOND


class UtcTime(TypeDecorator[datetime]):
    """An aware datetime in UTC, held as whole microseconds."""

    impl = BigInteger
    cache_ok = True

    def process_bind_param(self, value: datetime | None, dialect: Dialect) -> int | None:
        if value is None:
            return None
        if value.tzinfo is None:
            raise ValueError("the store takes only times with their zone")
        return micros(value)

    def process_result_value(self, value: int | None, dialect: Dialect) -> datetime | None:
        return None if value is None else EPOCH + timedelta(microseconds=value)


class Store:
    """An open store. Give it to a step; the step decides whether it reads or writes."""

    def __init__(self, engine: Engine, busy_s: int = 30) -> None:
        self.engine = engine
        self._busy_s = busy_s

    @classmethod
    def open(cls, url: str, busy_s: int = 30) -> "Store":
        """Open the store at a URL; StoreDown with the remedy where that can't be done."""
        parsed = parsed_url(url)
        if parsed.get_backend_name() == "sqlite":
            return cls(_sqlite(parsed, busy_s), busy_s)
        driver = parsed.set(drivername="postgresql+psycopg")
        return cls(create_engine(driver, pool_pre_ping=True, hide_parameters=True), busy_s)

    @property
    def is_sqlite(self) -> bool:
        return self.engine.dialect.name == "sqlite"

    @property
    def name(self) -> str:
        """Its URL without a password."""
        return self.engine.url.render_as_string(hide_password=True)

    @contextmanager
    def reading(self) -> Iterator[Connection]:
        """One consistent view of the store."""
        with in_own_words(), self._connect(write=False) as connection, connection.begin():
            yield connection

    @contextmanager
    def writing(self) -> Iterator[Connection]:
        """The write transaction: all of it is kept, or none."""
        with in_own_words(), self._connect(write=True) as connection, connection.begin():
            yield connection

    @contextmanager
    def arrivals(self) -> Iterator[None]:
        """Held by whatever takes rows in, from before it reads the clock until its rows are kept.

        Who reads the clock inside, as a draft does, knows that nothing is still on its way that will claim to
        have been knowable before. It ends with the process that holds it.
        """
        if self.is_sqlite:
            with _file_lock(self.engine.url.database, self._busy_s):
                yield
            return
        with in_own_words(), self._connect(write=True) as connection:
            connection.execution_options(isolation_level="AUTOCOMMIT")
            connection.exec_driver_sql(f"SET lock_timeout = '{self._busy_s}s'")
            connection.exec_driver_sql(f"SELECT pg_advisory_lock({_ARRIVALS})")
            try:
                yield
            finally:
                connection.exec_driver_sql(f"SELECT pg_advisory_unlock({_ARRIVALS})")
                connection.exec_driver_sql("RESET lock_timeout")

    def close(self) -> None:
        self.engine.dispose()

    def _connect(self, *, write: bool) -> Connection:
        options: dict[str, Any] = {"leafturn_write": write}
        if not self.is_sqlite and not write:
            options["isolation_level"] = "REPEATABLE READ"
        return self.engine.connect().execution_options(**options)


def parsed_url(url: str) -> URL:
    """The parts of a store's URL; StoreDown, without repeating what may hold a password, where it is none."""
    try:
        parsed = make_url(url)
        if parsed.get_backend_name() in ("sqlite", "postgresql"):
            return parsed
    except (ArgumentError, ValueError):
        pass
    raise StoreDown("store.url is no URL of a store; write sqlite:///path, or postgresql://user@host/name")


def file_of(url: str) -> Path | None:
    """The file that a URL of SQLite means; None for any other."""
    try:
        parsed = parsed_url(url)
    except StoreDown:
        return None
    in_a_file = parsed.get_backend_name() == "sqlite" and parsed.database not in (None, "", ":memory:")
    return Path(str(parsed.database)) if in_a_file else None


def _sqlite(url: URL, busy_s: int) -> Engine:
    _make_private(url.database)
    engine = create_engine(url, connect_args={"timeout": busy_s}, hide_parameters=True)

    @event.listens_for(engine, "connect")
    def _set_up(connection: sqlite3.Connection, _record: object) -> None:
        connection.isolation_level = None  # we say BEGIN ourselves
        for pragma in ("journal_mode=WAL", "synchronous=FULL", "foreign_keys=ON"):
            connection.execute(f"PRAGMA {pragma}")

    @event.listens_for(engine, "begin")
    def _begin(connection: Connection) -> None:
        write = connection.get_execution_options().get("leafturn_write", True)
        connection.exec_driver_sql("BEGIN IMMEDIATE" if write else "BEGIN")

    return engine


def _make_private(database: str | None) -> None:
    """See that the file is there and its owner's alone; what SQLite writes beside it gets the same mode."""
    if not database or database == ":memory:":
        return
    try:
        Path(database).parent.mkdir(parents=True, exist_ok=True)
        os.close(os.open(database, os.O_RDWR | os.O_CREAT, 0o600))
    except OSError as error:
        raise _can_not_keep(database, error) from error


def _can_not_keep(database: str, error: OSError) -> StoreDown:
    return StoreDown(f"the store can't be kept in {database}: {error.strerror}; mend that, or change store.url")


@contextmanager
def _file_lock(database: str | None, busy_s: int) -> Iterator[None]:
    """A lock beside the store's file; the operating system lets go of it when the process ends."""
    if not database or database == ":memory:":
        yield
        return
    try:
        handle = os.open(f"{database}-arrivals", os.O_RDWR | os.O_CREAT, 0o600)
    except OSError as error:
        raise _can_not_keep(database, error) from error
    try:
        _wait_for(handle, busy_s)
        yield
    finally:
        os.close(handle)


def _wait_for(handle: int, busy_s: int) -> None:
    for _ in range(busy_s * 20):
        try:
            return fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            time.sleep(0.05)
    raise StoreBusy("another process is taking a file in; try again when it is done")


@contextmanager
def in_own_words() -> Iterator[None]:
    """Outside errors become ours here and nowhere else."""
    try:
        yield
    except DBAPIError as error:
        if (ours := _ours(error)) is None:
            raise
        raise ours from error


_HELD_UP = frozenset({"40001", "40P01", "55P03"})  # serialization failure, deadlock, lock not available
_TWICE = "23505"  # unique violation (SQLSTATE codes of SQL and of PostgreSQL's appendix A)


def _ours(error: DBAPIError) -> Unreachable | None:
    """Our word for what the database said; never with values, which may be somebody's."""
    words, code = " ".join(str(error.orig).split()), getattr(error.orig, "sqlstate", None)
    if code in _HELD_UP or (isinstance(error, OperationalError) and ("locked" in words or "busy" in words)):
        return StoreBusy("another process is writing to the store; try again in a moment")
    if isinstance(error, IntegrityError) and (code == _TWICE or "UNIQUE constraint" in words):
        return StoreBusy("another process kept the same at the same moment, and nothing was kept here; run it again")
    if isinstance(error, OperationalError) or error.connection_invalidated:
        return StoreDown(f"the store did not answer: {words}")
    if "not a database" in words or "malformed" in words:
        return StoreDown(f"the store is damaged or no store of ours ({words}); bring back a copy, or change store.url")
    return None
