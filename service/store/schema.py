"""All tables together, and the way from one shape of the store to the next.

On SQLite a changed table is rebuilt; with foreign keys on, that rebuild deletes the rows of its children.
So they are switched off before the transaction, and every reference is checked before it ends.
"""

from alembic import command
from alembic.autogenerate import compare_metadata
from alembic.config import Config
from alembic.runtime.migration import MigrationContext
from alembic.script import ScriptDirectory
from sqlalchemy import Connection

from service.errors import StoreDown, WrongState
from service.store import audit, editions, jobs, network, observations, outbox, reportables, rules, signals, weather
from service.store.base import Store, in_own_words, metadata

TABLES = (audit, editions, jobs, network, observations, outbox, reportables, rules, signals, weather)
_UPGRADING = 7_203_611  # any fixed number: the name of PostgreSQL's lock on upgrading


def upgrade(store: Store) -> None:
    """Bring the store to the newest shape; does nothing, quickly, where it has it already."""
    scripts, at = ScriptDirectory.from_config(_config()), current(store)
    if at == scripts.get_current_head():
        return
    if at is not None and at not in {script.revision for script in scripts.walk_revisions()}:
        raise WrongState(f"the store was shaped by a newer version of this program ({at}); run that one, or a later")
    migrate(store, "head")


def migrate(store: Store, revision: str, *, down: bool = False) -> None:
    """Move the store to a revision, in one transaction."""
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
        return MigrationContext.configure(c).get_current_revision()


def differences(store: Store) -> list[str]:
    """What the store has that the code has not, or the other way round; empty where they agree."""
    with store.reading() as c:
        context = MigrationContext.configure(c, opts={"compare_type": True})
        return [str(difference) for difference in compare_metadata(context, metadata)]


def _config(connection: Connection | None = None) -> Config:
    config = Config()
    config.set_main_option("script_location", "service:store/migrations")
    config.attributes["connection"] = connection
    return config


def _check_references(store: Store, c: Connection) -> None:
    if store.is_sqlite:
        broken = c.exec_driver_sql("PRAGMA foreign_key_check").fetchall()
        if broken:
            raise StoreDown(f"the new shape of the store breaks {len(broken)} references, so it was left as it was")
