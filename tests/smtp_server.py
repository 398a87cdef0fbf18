"""A real SMTP server for tests: keeps the raw bytes of what it is sent, and misbehaves as it is told.

`smtp_server.pem` holds a certificate for 127.0.0.1 and its key, made for these tests and trusted by nobody:
openssl req -x509 -newkey ec -pkeyopt ec_paramgen_curve:prime256v1 -nodes -days 36500
-subj "/CN=invented test server" -addext "subjectAltName=IP:127.0.0.1,DNS:localhost"
"""

import asyncio
import re
import ssl
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from aiosmtpd.smtp import SMTP, Envelope, Session

from service.delivery.maildir_server import LocalServer
from service.settings import MailSettings

PEM = Path(__file__).with_name("smtp_server.pem")
DROP = "drop the connection"


@dataclass(frozen=True)
class Received:
    sender: str
    recipient: str
    data: bytes
    over_tls: bool

    @property
    def message_id(self) -> str:
        found = re.search(rb"^Message-ID: (\S+)", self.data, re.MULTILINE)
        assert found is not None
        return found[1].decode()


Script = Callable[[str], str | None]  # what to answer for a recipient; None is the usual answer


class Inbox:
    """Keeps what it is sent. `on_rcpt` and `on_data` may answer otherwise, or drop the connection.

    `on_data` is asked after the message was kept where its answer is 2xx or DROP.
    """

    def __init__(self, on_rcpt: Script | None = None, on_data: Script | None = None, late_s: float = 0.0) -> None:
        self.received: list[Received] = []
        self.connections = 0
        self._on_rcpt, self._on_data, self._late_s = on_rcpt, on_data, late_s

    @property
    def message_ids(self) -> Counter[str]:
        return Counter(received.message_id for received in self.received)

    async def handle_EHLO(
        self, server: SMTP, session: Session, envelope: Envelope, hostname: str, responses: list[str]
    ) -> list[str]:
        self.connections += session.ssl is None
        session.host_name = hostname
        return responses

    async def handle_RCPT(
        self, server: SMTP, session: Session, envelope: Envelope, address: str, options: list[str]
    ) -> str:
        answer = self._on_rcpt(address) if self._on_rcpt else None
        if answer == DROP:
            _abort(server)
        if answer is None:
            envelope.rcpt_tos.append(address)
        return answer or "250 OK"

    async def handle_DATA(self, server: SMTP, session: Session, envelope: Envelope) -> str:
        [recipient] = envelope.rcpt_tos
        answer = (self._on_data(recipient) if self._on_data else None) or "250 OK"
        if answer == DROP or answer.startswith("2"):
            assert isinstance(envelope.original_content, bytes)
            kept = Received(envelope.mail_from or "", recipient, envelope.original_content, session.ssl is not None)
            self.received.append(kept)
        if answer == DROP:
            _abort(server)
        if self._late_s:
            await asyncio.sleep(self._late_s)
        return answer


class DropsInData(SMTP):
    """Takes the first line of each message, then drops the connection."""

    async def smtp_DATA(self, arg: str) -> None:
        await self.push("354 go on")
        await self._reader.readuntil(b"\r\n")
        _abort(self)


def serving(handler: Any, protocol: type[SMTP] = SMTP, **options: Any) -> LocalServer:
    """A server for a `with`; options are aiosmtpd's."""
    values = {"hostname": "localhost", "enable_SMTPUTF8": True} | options
    return LocalServer(handler, protocol=lambda handler: protocol(handler, **values))


def tls() -> tuple[ssl.SSLContext, ssl.SSLContext]:
    """The server's side and the side of a client that trusts it."""
    server = ssl.SSLContext(ssl.PROTOCOL_TLS_SERVER)
    server.load_cert_chain(PEM)
    return server, ssl.create_default_context(cafile=str(PEM))


def mail_settings(server: LocalServer, **changes: Any) -> MailSettings:
    """Settings that lead to the server, without TLS unless a change says so."""
    values = {"host": server.host, "port": server.port, "starttls": "never", "timeout_s": 5.0}
    return MailSettings(**(values | {"sender": "digest@leafturn.example"} | changes))


def _abort(server: SMTP) -> None:
    assert isinstance(server.transport, asyncio.Transport)
    server.transport.abort()
