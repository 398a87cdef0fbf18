"""The sender that talks to an SMTP server, over a few connections that stay open.

What an interrupted conversation means depends on where it broke (RFC 5321 section 4.1.1.4: the server
answers for a message once it has answered its final dot). Before DATA the message was certainly not
accepted. From DATA on it is doubtful, until the answer is there.
"""

import asyncio
import contextlib
import ssl

import aiosmtplib

from service.delivery.addresses import on_the_wire
from service.delivery.sender import Answer, Mail, Outcome
from service.errors import MailDown, Refused
from service.settings import MailSettings

_CUT_OFF = (aiosmtplib.SMTPServerDisconnected, aiosmtplib.SMTPTimeoutError, OSError)
_STEPS = 10  # waits of one message: connect, greeting, EHLO, STARTTLS, EHLO, AUTH, MAIL, RCPT, DATA, final dot
_QUIET_S = 5.0  # a connection unused for longer is tried with RSET before it gets a message [s]


class SmtpSender:
    """Gives messages to the server of the settings.

    Parameters
    ----------
    mail
        Where the server is and how to talk to it.
    password
        The password that goes with `mail.user`.
    hello
        The name that this side gives itself; servers like one that DNS knows.
    tls_context
        How certificates are checked; by default against the machine's own list.
    """

    def __init__(
        self,
        mail: MailSettings,
        *,
        password: str = "",
        hello: str = "localhost",
        tls_context: ssl.SSLContext | None = None,
    ) -> None:
        self.connections = mail.connections
        self.longest_s = _STEPS * mail.timeout_s
        self._mail, self._password, self._hello, self._tls = mail, password, hello, tls_context
        self._where = f"{mail.host}:{mail.port}"

    async def open(self) -> None:
        self._idle: list[tuple[aiosmtplib.SMTP, float]] = []
        self._open = 0
        self._freed = asyncio.Condition()
        await self._give_back(await self._connect())

    async def send(self, mail: Mail) -> Answer:
        try:
            envelope = on_the_wire(mail.sender), on_the_wire(mail.recipient)
        except Refused as error:
            return Answer(Outcome.REFUSED, str(error))
        if not (answer := await self._try(envelope, mail.data)):
            answer = await self._try(envelope, mail.data)  # an old connection may have been closed meanwhile
        return answer or Answer(Outcome.LATER, "the server closed the connection before it took the message")

    async def close(self) -> None:
        while self._idle:
            connection, _ = self._idle.pop()
            with contextlib.suppress(*_CUT_OFF, aiosmtplib.SMTPException):
                await connection.quit(timeout=1.0)
            connection.close()

    async def _try(self, envelope: tuple[str, str], data: bytes) -> Answer | None:
        """One conversation; None where the connection broke before the message was handed over."""
        connection = await self._take()
        try:
            answer = await _converse(connection, envelope, data)
        except BaseException:
            await self._drop(connection)  # cancelled half-way: its next answer would be for this message
            raise
        if answer is None or answer.outcome is Outcome.DOUBTFUL or answer.code == 421:
            await self._drop(connection)
        elif answer.outcome is Outcome.ACCEPTED or await _reset(connection):
            await self._give_back(connection)
        else:
            await self._drop(connection)
        return answer

    async def _take(self) -> aiosmtplib.SMTP:
        """An open connection. A server that allows fewer than we want is served by those it allows."""
        while True:
            while self._idle:
                connection, since = self._idle.pop()
                quiet = asyncio.get_running_loop().time() - since
                if connection.is_connected and (quiet < _QUIET_S or await _reset(connection)):
                    return connection
                await self._drop(connection)
            try:
                return await self._connect()
            except MailDown:
                if not self._open:
                    raise
            async with self._freed:
                await self._freed.wait_for(lambda: self._idle or not self._open)

    async def _give_back(self, connection: aiosmtplib.SMTP) -> None:
        self._idle.append((connection, asyncio.get_running_loop().time()))
        async with self._freed:
            self._freed.notify()

    async def _drop(self, connection: aiosmtplib.SMTP) -> None:
        connection.close()
        self._open -= 1
        async with self._freed:
            self._freed.notify_all()

    async def _connect(self) -> aiosmtplib.SMTP:
        connection = aiosmtplib.SMTP(
            hostname=self._mail.host,
            port=self._mail.port,
            username=self._mail.user or None,
            password=self._password or None,
            local_hostname=self._hello,
            timeout=self._mail.timeout_s,
            start_tls=self._mail.starttls == "required",
            tls_context=self._tls,
        )
        try:
            await connection.connect()
            await _greet(connection)
        except (aiosmtplib.SMTPException, OSError) as error:
            raise MailDown(self._why(error)) from error
        self._open += 1
        return connection

    def _why(self, error: Exception) -> str:
        """What kept the conversation from starting, and what to do about it."""
        if isinstance(error, aiosmtplib.SMTPAuthenticationError):
            return f"the mail server {self._where} refused the user name or password: {error.code} {error.message}"
        if isinstance(error, ssl.SSLError):
            return f"the certificate of the mail server {self._where} can't be trusted: {error}"
        if isinstance(error, aiosmtplib.SMTPResponseException):
            return f"the mail server {self._where} refuses the conversation: {error.code} {error.message}"
        if "STARTTLS" in str(error):
            remedy = "nothing was sent in the clear; name one that does, or for one on this machine: mail.starttls"
            return f"the mail server {self._where} does not offer STARTTLS; {remedy}"
        return f"the mail server {self._where} does not answer ({error}); see mail.host and mail.port"


async def _greet(connection: aiosmtplib.SMTP) -> None:
    """EHLO, or HELO for a server that knows only that, before any message depends on it."""
    if not connection.is_ehlo_or_helo_needed:
        return
    try:
        await connection.ehlo()
    except aiosmtplib.SMTPHeloError:
        await connection.helo()


async def _converse(connection: aiosmtplib.SMTP, envelope: tuple[str, str], data: bytes) -> Answer | None:
    sender, recipient = envelope
    try:
        options, encoding = [], "ascii"
        if not (sender + recipient).isascii():
            if not connection.supports_extension("smtputf8"):
                return Answer(Outcome.REFUSED, "the mail server takes only addresses in plain letters (no SMTPUTF8)")
            options, encoding = ["SMTPUTF8"], "utf-8"
        await connection.mail(sender, options=options, encoding=encoding)
        await connection.rcpt(recipient, encoding=encoding)
    except aiosmtplib.SMTPResponseException as error:
        return _unwilling(error, otherwise=Outcome.LATER)
    except _CUT_OFF:
        return None
    try:
        response = await connection.data(data)
    except aiosmtplib.SMTPResponseException as error:
        return _unwilling(error, otherwise=Outcome.DOUBTFUL)
    except _CUT_OFF as error:
        return Answer(Outcome.DOUBTFUL, f"no answer to the message: {error}")
    return Answer(Outcome.ACCEPTED, " ".join(response.message.split()), response.code)


def _unwilling(error: aiosmtplib.SMTPResponseException, *, otherwise: Outcome) -> Answer:
    """RFC 5321 section 4.2.1: the first digit says whether to try again. Any other digit is out of turn."""
    by_digit = {4: Outcome.LATER, 5: Outcome.REFUSED}
    code = error.code if error.code > 0 else None  # the library's -1 is an answer that could not be read
    return Answer(by_digit.get(error.code // 100, otherwise), " ".join(error.message.split()), code)


async def _reset(connection: aiosmtplib.SMTP) -> bool:
    try:
        await connection.rset()
    except (*_CUT_OFF, aiosmtplib.SMTPException):
        return False
    return True


def greet(mail: MailSettings, password: str) -> str:
    """Open a conversation as a sending would, and close it; says how it went. MailDown where it fails."""

    async def conversation() -> None:
        sender = SmtpSender(mail, password=password)
        await sender.open()
        await sender.close()

    asyncio.run(conversation())
    how = "with STARTTLS" if mail.starttls == "required" else "without STARTTLS, as the settings say"
    return f"{mail.host}:{mail.port} answers, {how}"
