"""`leafturn doctor`: looks at everything the service stands on and says, in plain words, what to mend."""

import os
import shutil
from collections.abc import Iterator
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit
from zoneinfo import available_timezones

from service import pipeline
from service import settings as settings_file
from service.clock import Clock
from service.errors import LeafturnError
from service.settings import Settings

Finding = dict[str, Any]
ROOM_NEEDED_GB = 1.0
RELEASED = datetime(2026, 1, 1, tzinfo=UTC)


def examine(config: Path | None, clock: Clock) -> list[Finding]:
    """Every finding, in the order in which to mend them: what, whether it is well, and in words what to do."""
    try:
        settings = settings_file.read(config)
        settings_file.keys(settings)
    except LeafturnError as error:
        return [_finding("settings", False, str(error))]
    if open_files := [str(file) for file in _secrets(settings, config) if file.stat().st_mode & 0o077]:
        words = f"others on this machine can read what is secret; run: chmod 600 {' '.join(open_files)}"
        return [_finding("settings", False, words), *_the_rest(settings, clock)]
    where = config or Path(settings_file.FILE_NAME)
    said = (
        f"{where} is read" if where.exists() else "no settings file here; defaults are used (leafturn init makes one)"
    )
    return [_finding("settings", True, said), *_the_rest(settings, clock)]


def _secrets(settings: Settings, config: Path | None) -> list[Path]:
    """The files that hold keys, passwords, or people's names and addresses."""
    with_password = settings.mail.password_file or (config or settings_file.FILE_NAME if settings.mail.password else "")
    named = (settings.keys_file, with_password, pipeline.store_file(settings))
    return [Path(name) for name in named if name and Path(name).is_file()]


def _the_rest(settings: Settings, clock: Clock) -> Iterator[Finding]:
    newest = None
    try:
        store = pipeline.open_store(settings)
        try:
            well, words, newest = pipeline.examine_store(store)
        finally:
            store.close()
        yield _finding("store", well, words)
    except LeafturnError as error:
        yield _finding("store", False, str(error), error.exit_code)
    try:
        yield _finding("mail server", True, pipeline.examine_mail(settings))
    except LeafturnError as error:
        yield _finding("mail server", False, str(error), error.exit_code)
    yield _links(settings)
    yield _clock(clock, newest)
    yield _disk(settings)


def _links(settings: Settings) -> Finding:
    """Where the links of a digest lead; RFC 8058 section 3.1 asks for https, or no mail program offers the way out."""
    url = urlsplit(settings.web.base_url)
    if url.hostname in ("localhost", "127.0.0.1", "::1"):
        return _finding("links", False, f"digests lead to {url.geturl()}, which no reader can open; set web.base_url")
    if url.scheme != "https":
        return _finding("links", False, f"digests lead to {url.geturl()}; set web.base_url to an https address")
    return _finding("links", True, f"digests lead to {url.geturl()}")


def _clock(clock: Clock, newest: datetime | None) -> Finding:
    now = clock.now()
    stated = f"the clock says {now:%Y-%m-%d %H:%M} UTC"
    if now < RELEASED:
        return _finding("clock", False, f"{stated}, which is before this program was written; set the machine's clock")
    if newest is not None and newest > now + timedelta(minutes=5):
        return _finding(
            "clock", False, f"{stated}, yet the store holds rows that arrived at {newest:%Y-%m-%d %H:%M} UTC"
        )
    if not available_timezones():
        return _finding("clock", False, f"{stated}, but this machine has no time zone data; install tzdata")
    return _finding("clock", True, stated)


def _disk(settings: Settings) -> Finding:
    file = pipeline.store_file(settings)
    folder = file.parent if file else Path(settings.data_dir)
    while not folder.exists():
        folder = folder.absolute().parent
    free = shutil.disk_usage(folder).free / 1e9
    if not os.access(folder, os.W_OK):
        return _finding("disk", False, f"{folder} can't be written to; change its owner, or data_dir")
    if free < ROOM_NEEDED_GB:
        return _finding("disk", False, f"{free:.1f} GB free; make room for at least {ROOM_NEEDED_GB:.0f} GB")
    return _finding("disk", True, f"{free:.0f} GB free")


def _finding(what: str, well: bool, words: str, exit_code: int = 1) -> Finding:
    return {"what": what, "well": well, "text": words, "exit_code": 0 if well else exit_code}
