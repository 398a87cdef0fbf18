"""Keeps a request small and quick before anything else sees it."""

import asyncio
from collections.abc import Awaitable, Callable, MutableMapping
from typing import Any

from uvicorn.protocols.http.h11_impl import H11Protocol

Message = MutableMapping[str, Any]
Receive = Callable[[], Awaitable[Message]]
Send = Callable[[Message], Awaitable[None]]
App = Callable[[MutableMapping[str, Any], Receive, Send], Awaitable[None]]
Refuse = Callable[[int], tuple[list[tuple[bytes, bytes]], bytes]]  # headers and body of a refusal


class Patient(H11Protocol):
    """HTTP whose connections are closed where no request comes: uvicorn by itself waits for ever for a first one.

    Two hundred idle connections would else keep everyone from the way out.
    """

    patience_s = 10.0  # for a request's head; a connection between two requests may stay for twice that

    def connection_made(self, transport: asyncio.Transport) -> None:  # type: ignore[override]
        super().connection_made(transport)
        self._last: object = None
        self._look_later()

    def connection_lost(self, exc: Exception | None) -> None:
        self._timer.cancel()
        super().connection_lost(exc)

    def _look_later(self) -> None:
        self._timer = self.loop.call_later(self.patience_s, self._look)

    def _look(self) -> None:
        waiting = self.cycle is None or self.cycle.response_complete
        if waiting and self.cycle is self._last:
            self.transport.close()
            return
        self._last = self.cycle
        self._look_later()


class Limits:
    """ASGI middleware: reads the whole body, at most `largest` bytes within `patience_s` seconds."""

    def __init__(self, app: App, refuse: Refuse, largest: int, patience_s: float) -> None:
        self._app, self._refuse = app, refuse
        self._largest, self._patience_s = largest, patience_s

    async def __call__(self, scope: MutableMapping[str, Any], receive: Receive, send: Send) -> None:
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        try:
            async with asyncio.timeout(self._patience_s):
                body = await self._body(scope, receive)
        except TimeoutError:
            await self._answer(408, send)
            return
        if body is None:
            await self._answer(413, send)
            return
        await self._app(scope, _once(body, receive), send)

    async def _body(self, scope: MutableMapping[str, Any], receive: Receive) -> bytes | None:
        """The body, or None as soon as it is known to be too large."""
        stated = dict(scope["headers"]).get(b"content-length", b"0")
        if not stated.isdigit() or int(stated) > self._largest:
            return None
        body, more = b"", True
        while more:
            message = await receive()
            if message["type"] == "http.disconnect":
                break
            body += message.get("body", b"")
            more = message.get("more_body", False)
            if len(body) > self._largest:
                return None
        return body

    async def _answer(self, status: int, send: Send) -> None:
        headers, body = self._refuse(status)
        headers = [*headers, (b"content-length", str(len(body)).encode()), (b"connection", b"close")]
        await send({"type": "http.response.start", "status": status, "headers": headers})
        await send({"type": "http.response.body", "body": body})


def _once(body: bytes, receive: Receive) -> Receive:
    """A receive that gives the body that was read, then whatever follows."""
    waiting: list[Message] = [{"type": "http.request", "body": body, "more_body": False}]

    async def again() -> Message:
        return waiting.pop() if waiting else await receive()

    return again
