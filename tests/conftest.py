"""Fixtures that every folder shares: a new, empty store of each kind."""

import re
from collections import Counter
from collections.abc import Iterator
from pathlib import Path

import pytest

from service.store.base import Store, metadata
from tests import postgres


@pytest.fixture(scope="session")
def postgres_server() -> Iterator[str]:
    with postgres.server() as url:
        yield url


@pytest.fixture(params=["sqlite", "postgresql"])
def store_url(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[str]:
    """The URL of an empty database; every test that asks for it runs on both stores."""
    if request.param == "sqlite":
        yield f"sqlite:///{tmp_path / 'store.db'}"
        return
    with postgres.database(request.getfixturevalue("postgres_server")) as url:
        yield url


@pytest.fixture
def store(store_url: str) -> Iterator[Store]:
    """An open store with all tables."""
    opened = Store.open(store_url)
    metadata.create_all(opened.engine)
    yield opened
    opened.close()


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter) -> None:
    """Say how many tests ran on each store; the same set must have run on both."""
    counts = _by_store(terminalreporter)
    said = ", ".join(f"{count} on {name}" for name, count in sorted(counts.items()))
    terminalreporter.write_line(f"tests that passed on each store: {said or 'no store was asked for'}")
    for report in terminalreporter.stats.get("passed", ()):
        if "/faults/" in report.nodeid and report.capstdout:  # what a kill test has to say is said, though it passed
            terminalreporter.write(report.capstdout)


@pytest.hookimpl(trylast=True)
def pytest_sessionfinish(session: pytest.Session) -> None:
    reporter = session.config.pluginmanager.get_plugin("terminalreporter")
    if reporter is not None and not hasattr(session.config, "workerinput"):
        counts = _by_store(reporter)
        if session.exitstatus == pytest.ExitCode.OK and len(set(counts.values())) > 1:
            session.exitstatus = pytest.ExitCode.TESTS_FAILED


def _by_store(reporter: pytest.TerminalReporter) -> Counter[str]:
    found = (re.search(r"[\[-](sqlite|postgresql)[\]-]", report.nodeid) for report in reporter.stats.get("passed", ()))
    return Counter(match.group(1) for match in found if match)
