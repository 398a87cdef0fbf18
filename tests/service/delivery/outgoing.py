"""Messages in an outbox, and what composes them, for tests of sending."""

from collections.abc import Callable, Sequence
from datetime import datetime, timedelta
from typing import Any

from service.clock import SetClock
from service.delivery.sender import Mail, Sender
from service.delivery.worker import deliver
from service.settings import Settings
from service.store import network, outbox
from service.store.base import Store
from service.store.leases import Job
from service.store.outbox import Outgoing, message_id
from tests.builders import NOW, a_district


def a_message(key: str = "reader", **changes: Any) -> Outgoing:
    """A notice to `<key>@example.org`, due now; notices belong to no edition."""
    values: dict[str, Any] = {
        "kind": "notice",
        "district": "north",
        "subscriber": key,
        "domain": "example.org",
        "message_id": message_id(changes.get("kind", "notice"), key, "leafturn.example"),
        "due": NOW,
        "expires_at": NOW + timedelta(days=3),
    }
    return Outgoing(key=key, **(values | changes))


def put(store: Store, *keys: str, now: datetime = NOW) -> None:
    """A district, and one notice for each key."""
    with store.writing() as c:
        network.save_district(c, a_district(), NOW)
        outbox.enqueue(c, [a_message(key) for key in keys], now)


def composed(job: Job) -> Mail:
    """A short message to the subscriber of a job."""
    data = f"Message-ID: {job.message_id}\r\nSubject: Look\r\n\r\nLook at your canola.\r\n"
    return Mail("digest@leafturn.example", f"{job.subscriber}@example.org", data.encode())


def run(
    store: Store,
    sender: Sender,
    at: datetime = NOW,
    compose: Callable[[Job], Any] = composed,
    **delivery: Any,
) -> dict[str, int]:
    """One run of the worker; returns only the counts that aren't 0."""
    settings = Settings(delivery={"doubtful": "retry"} | delivery)  # type: ignore[arg-type]
    counted = deliver(store, sender, compose, SetClock(at), settings)
    return {name: number for name, number in counted.items() if number}


def states(store: Store) -> dict[str, int]:
    with store.reading() as c:
        return {state: number for state, number in outbox.counts(c).items() if number}


def history(store: Store, key: str) -> Sequence[tuple[str, int | None]]:
    """Outcome and code of each attempt at a message."""
    with store.reading() as c:
        return [(attempt.outcome, attempt.code) for attempt in outbox.attempts(c, "notice", key)]
