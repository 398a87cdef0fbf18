"""The port to whatever takes our mail: an SMTP server, or a folder of files."""

from dataclasses import dataclass
from enum import StrEnum
from typing import Protocol


@dataclass(frozen=True, slots=True)
class Mail:
    """One message with its envelope, ready to be given away."""

    sender: str
    recipient: str
    data: bytes


@dataclass(frozen=True, slots=True)
class Skip:
    """Why a message is not sent after all, such as a reader who has left."""

    reason: str


class Outcome(StrEnum):
    """What an answer means for the message."""

    ACCEPTED = "accepted"  # the other side is now answerable for it
    LATER = "later"  # not now; trying again can help
    REFUSED = "refused"  # never
    DOUBTFUL = "doubtful"  # it was handed over, and no answer came back


@dataclass(frozen=True, slots=True)
class Answer:
    """What came back for one message; `code` is the server's, if it gave one."""

    outcome: Outcome
    text: str
    code: int | None = None


class Sender(Protocol):
    """Takes messages. `open` and `close` stand around all sending, in one event loop."""

    connections: int
    """How many messages may be under way at a time."""

    longest_s: float
    """The longest that one message can be under way [s]; a lease must outlast it."""

    async def open(self) -> None:
        """Make ready; MailDown where nothing can be sent."""

    async def send(self, mail: Mail) -> Answer:
        """Give one message away. MailDown only where the message was certainly not accepted."""

    async def close(self) -> None:
        """Let go of everything, quietly."""
