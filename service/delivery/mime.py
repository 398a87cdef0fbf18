"""A digest as the bytes of an Internet message: a fixed skeleton of headers round a text and an HTML part.

Written by hand since the standard library's writer takes twenty times as long and folds a long
List-Unsubscribe into encoded words, which no mail program can follow. All lines end in CRLF; nothing
but ASCII is written, except for an address that itself is not ASCII (RFC 6532, sent with SMTPUTF8).
"""

import base64
import hashlib
import html
import re
from collections.abc import Sequence
from datetime import datetime, timedelta
from email.utils import format_datetime
from functools import lru_cache

from rules.slip import SHOW_LINK, UNSUBSCRIBE_LINK, Rendered
from service.delivery.addresses import on_the_wire
from service.delivery.bodies import HARD_LINE, MARK, body
from service.errors import Refused

_LINE = 78  # longest line that RFC 5322 section 2.1.1 asks for, without CRLF
_LONGEST_NAME = len("Subject: ")  # of a header with free text: its first word must stand on the first line
_WORD_BYTES = 42  # UTF-8 bytes in one encoded word, 68 characters with its frame: fits beside the longest name
_KEPT = 1_000  # subjects; many readers share theirs
_ATOMS = re.compile(r"[A-Za-z0-9!#$%&'*+/=?^_`{|}~ -]+")
_ONE_TOKEN = re.compile(r"[!-~]+")


def build(
    *,
    rendered: Rendered,
    sender: str,
    sender_name: str,
    recipient: str,
    message_id: str,
    date: datetime,
    show_url: str,
    unsubscribe_url: str,
    list_id: str,
) -> bytes:
    """One message, ready for DATA.

    Parameters
    ----------
    rendered
        Subject, text and HTML, with placeholders where links belong. Without HTML it is text alone.
    sender, sender_name, recipient
        Two addresses, and the name beside the first.
    message_id, list_id
        With or without their angle brackets.
    date
        When it is sent, with its zone.
    show_url, unsubscribe_url
        What the placeholders stand for; the second is also the List-Unsubscribe of RFC 8058.

    Raises
    ------
    Refused
        Where an address, an id or a link holds what would break out of its header.
    """
    links = {SHOW_LINK: _checked(show_url, "link"), UNSUBSCRIBE_LINK: _checked(unsubscribe_url, "link")}
    headers = [
        _phrase("From", sender_name, sender),
        f"To: {on_the_wire(recipient)}",
        _unstructured("Subject", rendered.subject),
        f"Date: {_stamp(date.replace(microsecond=0), date.utcoffset())}",
        f"Message-ID: {_bracketed(message_id)}",
        f"List-Id: {_bracketed(list_id)}",
        _folded("List-Unsubscribe", f"<{unsubscribe_url}>"),
        "List-Unsubscribe-Post: List-Unsubscribe=One-Click",
        "Auto-Submitted: auto-generated",
        "MIME-Version: 1.0",
    ]
    parts = [body("plain", rendered.text, {name.encode(): url.encode() for name, url in links.items()})]
    if rendered.html:
        page = {name.encode(): html.escape(url, quote=True).encode() for name, url in links.items()}
        parts.append(body("html", rendered.html, page))
    return b"".join(["\r\n".join(headers).encode(), b"\r\n", *_joined(parts, message_id)])


def content_hash(data: bytes) -> str:
    """What is kept of a message once it is sent."""
    return hashlib.sha256(data).hexdigest()


def _joined(parts: Sequence[list[bytes]], message_id: str) -> list[bytes]:
    """One part as it is, or alternatives with the fullest last (RFC 2046 section 5.1.4)."""
    if len(parts) == 1:
        return parts[0]
    mark = MARK + hashlib.sha256(message_id.encode()).hexdigest()[:32].encode()
    made = [b'Content-Type: multipart/alternative;\r\n boundary="', mark, b'"\r\n\r\n']
    for part in parts:  # the line end before a delimiter belongs to the delimiter, so each part keeps its own
        made += [b"--", mark, b"\r\n", *part, b"\r\n"]
    return [*made, b"--", mark, b"--\r\n"]


# --- headers -----------------------------------------------------------------------------------


@lru_cache(maxsize=16)
def _stamp(moment: datetime, _offset: timedelta | None) -> str:
    """A second as RFC 5322 writes it; messages come by the hundred in each. Equal moments may differ in zone."""
    return format_datetime(moment)


@lru_cache(maxsize=_KEPT)
def _unstructured(name: str, text: str) -> str:
    """A header of free text: folded between words, or as encoded words (RFC 2047)."""
    text = _one_line(text)
    plain = text.isascii() and "=?" not in text and all(len(word) <= _LINE - _LONGEST_NAME for word in text.split(" "))
    return _folded(name, text) if plain else _folded(name, _encoded_words(text))


@lru_cache(maxsize=16)
def _phrase(header: str, name: str, address: str) -> str:
    """A header of one address, with a name beside it that can't be read as anything else."""
    name, address = _one_line(name), on_the_wire(address)
    if not name:
        return f"{header}: {address}"
    if not name.isascii() or "=?" in name or len(name) > _LINE // 2:
        name = _encoded_words(name)
    elif not _ATOMS.fullmatch(name):
        name = '"' + name.replace("\\", "\\\\").replace('"', '\\"') + '"'
    return _folded(header, f"{name} <{address}>")


def _folded(name: str, text: str) -> str:
    """Break before words that would make the line too long; a word itself is never broken."""
    lines = [f"{name}:"]
    for word in text.split(" "):
        if len(lines[-1]) + 1 + len(word) > _LINE:
            lines.append("")
        lines[-1] += " " + word
    if any(len(line) > HARD_LINE for line in lines):
        raise Refused(f"{name} holds a word that is too long for a line of mail")
    return "\r\n".join(lines)


def _encoded_words(text: str) -> str:
    """RFC 2047: words of base64, cut between characters; white space between them counts for nothing."""
    chunks, size = [""], 0
    for character in text:
        width = len(character.encode())
        if size + width > _WORD_BYTES:
            chunks.append("")
            size = 0
        chunks[-1] += character
        size += width
    return " ".join(f"=?utf-8?b?{base64.b64encode(chunk.encode()).decode()}?=" for chunk in chunks)


def _one_line(text: str) -> str:
    """Free text without anything that ends a line or steers a terminal; runs of space become one."""
    if text.isprintable():
        return " ".join(text.split())
    return " ".join("".join(character if character.isprintable() else " " for character in text).split())


def _bracketed(token: str) -> str:
    return f"<{_checked(token.removeprefix('<').removesuffix('>'), 'id')}>"


def _checked(token: str, what: str) -> str:
    if not _ONE_TOKEN.fullmatch(token) or "<" in token or ">" in token or len(token) > HARD_LINE - 3:
        raise Refused(f"this {what} can't stand in a mail header: {token[:80]!r}")
    return token
