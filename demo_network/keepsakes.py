"""A dozen delivered digests, chosen to be looked at: each planted thing that was told, and some quiet ones."""

import mailbox
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from email.header import decode_header, make_header
from email.message import Message
from pathlib import Path

from demo_network.check import SAID, Mail, Reader, plain_text, states
from demo_network.planted import EVENTS

HOW_MANY, EACH = 12, 2


@dataclass(frozen=True)
class Kept:
    """One digest that was kept: its files' name without ending, and why it is worth a look."""

    name: str
    week: str
    district: str
    reader: str
    subject: str
    shows: str


def keep(maildir: Path, folder: Path, mails: Sequence[Mail], readers: Mapping[str, Reader]) -> list[Kept]:
    """Write the chosen digests as they were delivered, each as a page and as text."""
    folder.mkdir(parents=True)
    box = mailbox.Maildir(maildir, factory=None, create=False)
    kept = []
    for number, (mail, shows) in enumerate(_chosen(mails, readers), start=1):
        message = box[mail.key]
        reader = readers[mail.recipient]
        name = f"{number:02d}-{mail.week}-{reader.district}"
        (folder / f"{name}.txt").write_text(plain_text(message), encoding="utf-8")
        (folder / f"{name}.html").write_text(_page(message), encoding="utf-8")
        kept.append(Kept(name, mail.week, reader.district, reader.id, _subject(message), shows))
    return kept


def _chosen(mails: Sequence[Mail], readers: Mapping[str, Reader]) -> list[tuple[Mail, str]]:
    """Two digests for each thing told, then one of each week until the dozen is full; by week."""
    chosen: dict[str, tuple[Mail, str]] = {}
    for mail, shows in [*_telling(mails, readers), *_ordinary(mails)]:
        if len(chosen) < HOW_MANY:
            chosen.setdefault(mail.key, (mail, shows))
    return sorted(chosen.values(), key=lambda pair: (pair[0].week, pair[0].recipient))


def _telling(mails: Sequence[Mail], readers: Mapping[str, Reader]) -> Iterator[tuple[Mail, str]]:
    for event in EVENTS:
        told = [mail for mail in mails if event.telling in SAID and states(mail, event, readers)]
        for mail in sorted(told, key=lambda mail: (mail.week, mail.recipient))[:EACH]:
            yield mail, f"{event.name}: {event.shown_as}"


def _ordinary(mails: Iterable[Mail]) -> Iterator[tuple[Mail, str]]:
    """One digest of each week, the first reader's by address, that tells of nothing planted or rare."""
    plain = sorted((mail for mail in mails if not mail.said), key=lambda mail: (mail.week, mail.recipient))
    seen = set()
    for mail in plain:
        if mail.week not in seen:
            seen.add(mail.week)
            yield mail, "an ordinary week: what is known, and how much looking stands behind it"


def _page(message: Message) -> str:
    part = next(part for part in message.walk() if part.get_content_type() == "text/html")
    return bytes(part.get_payload(decode=True)).decode(part.get_content_charset("utf-8"))


def _subject(message: Message) -> str:
    return str(make_header(decode_header(str(message["Subject"]))))
