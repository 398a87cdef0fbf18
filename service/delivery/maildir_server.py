"""A small SMTP server on this machine that keeps what it is sent in a Maildir.

For trying the whole way of a digest without a mail provider: the conversation is real, and nothing
leaves the machine.
"""

import asyncio
import contextlib
import mailbox
import socket
from collections.abc import Callable
from pathlib import Path
from threading import Thread
from typing import Any, Self

from aiosmtpd.smtp import SMTP, Envelope, Session

from service.errors import MailDown


class LocalServer:
    """Runs an aiosmtpd handler on a thread of its own, between `with` and its end.

    Parameters
    ----------
    handler
        Answers the steps of a conversation, as aiosmtpd describes.
    port
        0 takes any free one; `self.port` is the one taken.
    protocol
        Makes the server's side of a connection from the handler.
    """

    def __init__(self, handler: Any, *, port: int = 0, protocol: Callable[[Any], SMTP] | None = None) -> None:
        self.host, self.port = "127.0.0.1", port
        self._make = protocol or (lambda handler: SMTP(handler, hostname="localhost", enable_SMTPUTF8=True))
        self._handler = handler
        self._connections: set[SMTP] = set()
        self._stopping = False

    def __enter__(self) -> Self:
        try:
            self._listener = socket.create_server((self.host, self.port), backlog=100)
        except OSError as error:
            raise MailDown(f"no mail server can listen on port {self.port}: {error.strerror}") from error
        self._listener.setblocking(False)
        self.port = self._listener.getsockname()[1]
        self._thread = Thread(target=lambda: asyncio.run(self._serve()), name="smtp", daemon=True)
        self._thread.start()
        return self

    def __exit__(self, *_: object) -> None:
        self.stop()
        self._thread.join()

    def stop(self) -> None:
        """Close the door and hang up on everyone, soon; from any thread, and more than once if need be."""
        self._stopping = True
        with contextlib.suppress(OSError):  # closed already
            socket.create_connection((self.host, self.port), timeout=1.0).close()  # so that it looks up

    @property
    def open_connections(self) -> int:
        return sum(connection.transport is not None for connection in tuple(self._connections))

    async def _serve(self) -> None:
        loop = asyncio.get_running_loop()
        with self._listener:
            while True:
                client, _ = await loop.sock_accept(self._listener)
                if self._stopping:
                    break
                await loop.connect_accepted_socket(self._connection, client)
        client.close()
        for connection in self._connections:
            if isinstance(connection.transport, asyncio.Transport):
                connection.transport.abort()
        await asyncio.sleep(0)  # so that each hears of it

    def _connection(self) -> SMTP:
        self._connections = {known for known in self._connections if known.transport is not None}
        made = self._make(self._handler)
        self._connections.add(made)
        return made


class MaildirServer(LocalServer):
    """Accepts every message and keeps it, as sent, under the headers that a mailbox server adds."""

    def __init__(self, folder: Path, *, port: int = 0) -> None:
        super().__init__(_Keep(folder), port=port)


class _Keep:
    def __init__(self, folder: Path) -> None:
        folder.parent.mkdir(parents=True, exist_ok=True)
        self._box = mailbox.Maildir(folder, create=True)

    async def handle_DATA(self, server: SMTP, session: Session, envelope: Envelope) -> str:  # noqa: N802 - their name
        for recipient in envelope.rcpt_tos:
            head = f"Return-Path: <{envelope.mail_from}>\r\nDelivered-To: {recipient}\r\n"
            self._box.add(head.encode() + (envelope.original_content or b""))
        return "250 kept"
