"""All tables together, and the way from one shape of the store to the next.

On SQLite a changed table is rebuilt; with foreign keys on, that rebuild deletes the rows of its children.
So they are switched off before the transaction, and every reference is checked before it ends.

Every command asks for the newest shape and nearly all find it, so alembic is loaded only where there is
something to do.
"""

from importlib import resources
from typing import TYPE_CHECKING

from sqlalchemy import Connection, inspect, text

from service.errors import StoreDown, WrongState
from service.store import audit, editions, jobs, network, observations, outbox, reportables, rules, signals, weather
from service.store.base import Store, in_own_words, metadata

if TYPE_CHECKING:
    from alembic.config import Config

TABLES = (audit, editions, jobs, network, observations, outbox, reportables, rules, signals, weather)
_UPGRADING = 7_203_611  # any fixed number: the name of PostgreSQL's lock on upgrading


def upgrade(store: Store) -> None:
    """Bring the store to the newest shape; does nothing, quickly, where it has it already."""
    at, revisions = current(store), _revisions()
    if at == revisions[-1]:
        return
    if at is not None and at not in revisions:
        raise WrongState(f"the store was shaped by a newer version of this program ({at}); run that one, or a later")
    migrate(store, "head")


def migrate(store: Store, revision: str, *, down: bool = False) -> None:
    """Move the store to a revision, in one transaction."""
    from alembic import command

    step = command.downgrade if down else command.upgrade
    with in_own_words(), store.engine.connect() as c:
        raw = c.connection.driver_connection
        if store.is_sqlite and raw is not None:
            raw.execute("PRAGMA foreign_keys=OFF")
        try:
            with c.begin():
                if not store.is_sqlite:
                    c.exec_driver_sql(f"SELECT pg_advisory_xact_lock({_UPGRADING})")
                step(_config(c), revision)
                _check_references(store, c)
        finally:
            if store.is_sqlite and raw is not None:
                raw.execute("PRAGMA foreign_keys=ON")


def current(store: Store) -> str | None:
    """The revision that the store is at; None where it is empty."""
    with store.reading() as c:
        found = inspect(c).has_table("alembic_version")
        return c.scalar(text("SELECT version_num FROM alembic_version")) if found else None


def differences(store: Store) -> list[str]:
    """What the store has that the code has not, or the other way round; empty where they agree."""
    from alembic.autogenerate import compare_metadata
    from alembic.runtime.migration import MigrationContext

    with store.reading() as c:
        context = MigrationContext.configure(c, opts={"compare_type": True})
        return [str(difference) for difference in compare_metadata(context, metadata)]


def _revisions() -> list[str]:
    """The revisions there are, oldest first: a file's name begins with its revision."""
    files = resources.files("service.store.migrations.versions").iterdir()
    return sorted(file.name.partition("_")[0] for file in files if file.name[0].isdigit())


def _config(connection: Connection) -> "Config":
    from alembic.config import Config

    config = Config()
    config.set_main_option("script_location", "service:store/migrations")
    config.attributes["connection"] = connection
    return config


def _check_references(store: Store, c: Connection) -> None:
    if store.is_sqlite:
        broken = c.exec_driver_sql("PRAGMA foreign_key_check").fetchall()
        if broken:
            raise StoreDown(f"the new shape of the store breaks {len(broken)} references, so it was left as it was")
