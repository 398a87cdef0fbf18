"""A process that sends from the outbox until it is killed, and shows whether it is inside a transaction."""

import mmap
from datetime import datetime
from pathlib import Path

from sqlalchemy import Engine, Pool, event

from service.clock import SetClock
from service.delivery.smtp import SmtpSender
from service.delivery.worker import deliver
from service.settings import MailSettings, Settings
from service.store.base import Store
from tests.service.delivery.outgoing import composed

STARTED, TRANSACTION = 0, 1  # bytes of the shared file
NONE, OPEN, COMMITTING = 0, 1, 2  # what the second may be


def send_until_killed(store_url: str, port: int, now: datetime, shared: Path) -> None:
    """Send what is due; `shared` tells whoever watches how far this got."""
    with shared.open("r+b") as file, mmap.mmap(file.fileno(), 2) as flags:
        store = Store.open(store_url)
        _show(store.engine, "begin", flags, OPEN)
        _show(store.engine, "commit", flags, COMMITTING)  # told of just before the commit
        _show(store.engine.pool, "checkin", flags, NONE)
        flags[STARTED] = 1
        mail = MailSettings(port=port, starttls="never", connections=4)
        deliver(store, SmtpSender(mail), composed, SetClock(now), Settings(mail=mail))


def _show(target: Engine | Pool, name: str, flags: mmap.mmap, value: int) -> None:
    @event.listens_for(target, name)
    def _seen(*_: object) -> None:
        flags[TRANSACTION] = value
