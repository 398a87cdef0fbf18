"""A real site for tests: uvicorn in a thread, over a service of plain functions on a real store."""

import threading
import time
import urllib.error
import urllib.request
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import datetime
from email.message import Message
from typing import Any

import uvicorn
from fastapi import FastAPI

from service.clock import SetClock
from service.editions.render import page
from service.errors import NotFound
from service.store import network
from service.store.base import Store
from service.tokens import Tokens
from service.web.app import make_app, serving
from tests.builders import FOUNDED, NOW, a_district, a_subscriber
from tests.service.editions.views import a_view

KEY = "k" * 40


class Readers:
    """What the pages need, over the subscriber table."""

    def __init__(self, store: Store, tokens: Tokens) -> None:
        self.store, self.tokens = store, tokens

    def show(self, token: str, at: datetime) -> str:
        self._reader(self.tokens.read("show", token, at))
        return page(a_view())

    def check_unsubscribe(self, token: str, at: datetime) -> None:
        self._reader(self.tokens.read("unsubscribe", token, at))

    def unsubscribe(self, token: str, at: datetime) -> None:
        reader = self.tokens.read("unsubscribe", token, at)
        with self.store.writing() as c:
            network.set_subscriber_state(c, reader, "left")

    def state(self) -> str:
        with self.store.reading() as c:
            found = network.get_subscriber(c, "s1")
        assert found is not None
        return found.state

    def _reader(self, id: str) -> None:
        with self.store.reading() as c:
            if network.get_subscriber(c, id) is None:
                raise NotFound(f"there is no reader {id!r}")


@dataclass(frozen=True)
class Answer:
    status: int
    headers: Message
    text: str


@dataclass(frozen=True)
class Site:
    """A running site, its service, its clock, and links of the one reader."""

    url: str
    readers: Readers
    clock: SetClock
    tokens: Tokens

    def link(self, purpose: str, reader: str = "s1") -> str:
        return f"/{purpose}/{self.tokens.make(purpose, reader, NOW)}"

    def get(self, path: str) -> Answer:
        return self.ask(path)

    def ask(self, path: str, body: bytes | None = None, headers: Mapping[str, str] = {}, method: str = "") -> Answer:
        asked = urllib.request.Request(self.url + path, body, dict(headers), method=method or None)
        try:
            with urllib.request.urlopen(asked, timeout=20) as got:
                return Answer(got.status, got.headers, got.read().decode())
        except urllib.error.HTTPError as error:
            with error:
                return Answer(error.code, error.headers, error.read().decode())


@contextmanager
def running(app: FastAPI) -> Iterator[str]:
    """Serve an app on a free port of this machine; gives its address."""
    server = uvicorn.Server(serving(app, "127.0.0.1", 0))
    thread = threading.Thread(target=server.run, daemon=True)
    thread.start()
    try:
        while not server.started:
            assert thread.is_alive()
            time.sleep(0.01)
        yield f"http://127.0.0.1:{server.servers[0].sockets[0].getsockname()[1]}"
    finally:
        server.should_exit = True
        thread.join(20)


@contextmanager
def a_site(store: Store, **options: Any) -> Iterator[Site]:
    """A site with one confirmed reader."""
    with store.writing() as c:
        network.save_district(c, a_district(), FOUNDED)
        network.save_subscribers(c, [a_subscriber()])
    tokens, clock = Tokens([KEY]), SetClock(NOW)
    readers = Readers(store, tokens)
    with running(make_app(readers, clock, **options)) as url:
        yield Site(url, readers, clock, tokens)
