"""A digest as the bytes of an Internet message: a fixed skeleton of headers round a text and an HTML part.

Written by hand since the standard library's writer takes twenty times as long and folds a long
List-Unsubscribe into encoded words, which no mail program can follow. All lines end in CRLF; nothing
but ASCII is written, except for an address that itself is not ASCII (RFC 6532, sent with SMTPUTF8).
"""

import base64
import binascii
import hashlib
import html
import re
from datetime import datetime
from email.utils import format_datetime

from rules.slip import SHOW_LINK, UNSUBSCRIBE_LINK, Rendered
from service.delivery.addresses import on_the_wire
from service.errors import Refused

_LINE = 78  # longest line that RFC 5322 section 2.1.1 asks for, without CRLF
_HARD_LINE = 998  # longest that it allows
_LONGEST_NAME = len("Subject: ")  # of a header with free text: its first word must stand on the first line
_WORD_BYTES = 42  # UTF-8 bytes in one encoded word, 68 characters with its frame: fits beside the longest name
_PRINTABLE = bytes([*b"\t\r\n", *range(0x20, 0x7F)])
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
        _phrase("From", sender_name, on_the_wire(sender)),
        f"To: {on_the_wire(recipient)}",
        _unstructured("Subject", rendered.subject),
        f"Date: {format_datetime(date)}",
        f"Message-ID: {_bracketed(message_id)}",
        f"List-Id: {_bracketed(list_id)}",
        _folded("List-Unsubscribe", f"<{unsubscribe_url}>"),
        "List-Unsubscribe-Post: List-Unsubscribe=One-Click",
        "Auto-Submitted: auto-generated",
        "MIME-Version: 1.0",
    ]
    page = {placeholder: html.escape(url, quote=True) for placeholder, url in links.items()}
    parts = [_part("plain", _linked(rendered.text, links))]
    if rendered.html:
        parts.append(_part("html", _linked(rendered.html, page)))
    body = _joined(parts, message_id)
    return "\r\n".join(headers).encode() + b"\r\n" + body


def content_hash(data: bytes) -> str:
    """What is kept of a message once it is sent."""
    return hashlib.sha256(data).hexdigest()


# --- bodies ------------------------------------------------------------------------------------


def _joined(parts: list[bytes], message_id: str) -> bytes:
    """One part as it is, or alternatives with the fullest last (RFC 2046 section 5.1.4)."""
    if len(parts) == 1:
        return parts[0]
    mark = _boundary(parts, message_id)
    head = b'Content-Type: multipart/alternative;\r\n boundary="' + mark + b'"\r\n\r\n'
    # The line end before a delimiter belongs to the delimiter, so each part keeps its own.
    return head + b"".join(b"--" + mark + b"\r\n" + part + b"\r\n" for part in parts) + b"--" + mark + b"--\r\n"


def _linked(text: str, links: dict[str, str]) -> str:
    for placeholder, url in links.items():
        text = text.replace(placeholder, url)
    if "{{link:" in text:
        raise Refused("a link placeholder is left over that no link belongs to")
    return text


def _part(subtype: str, text: str) -> bytes:
    """A part with its own headers: as it is where it can travel so, else quoted-printable (RFC 2045)."""
    if "\r" in text:
        text = text.replace("\r\n", "\n").replace("\r", "\n")
    data = text.replace("\n", "\r\n").encode()
    if not data.endswith(b"\r\n"):
        data += b"\r\n"
    charset, encoding = b"us-ascii", b"7bit"
    if not _travels_as_it_is(data):
        charset, encoding = b"utf-8", b"quoted-printable"
        data = binascii.b2a_qp(data, istext=True)
    kind = b"Content-Type: text/" + subtype.encode() + b"; charset=" + charset
    return kind + b"\r\nContent-Transfer-Encoding: " + encoding + b"\r\n\r\n" + data


def _travels_as_it_is(data: bytes) -> bool:
    """Printable ASCII, no line over 998, no space at the end of one (RFC 2045 sections 2.7 and 6.7)."""
    if data.translate(None, _PRINTABLE) or b" \r\n" in data or b"\t\r\n" in data:
        return False
    return max(map(len, data.split(b"\n"))) <= _HARD_LINE + len(b"\r")


def _boundary(parts: list[bytes], message_id: str) -> bytes:
    """A line that none of the parts holds; '=_' can't occur in quoted-printable (RFC 2045 section 6.7)."""
    mark = b"=_" + hashlib.sha256(message_id.encode()).hexdigest()[:32].encode()
    while any(mark in part for part in parts):
        mark += b"_"
    return mark


# --- headers -----------------------------------------------------------------------------------


def _unstructured(name: str, text: str) -> str:
    """A header of free text: folded between words, or as encoded words (RFC 2047)."""
    text = _one_line(text)
    plain = text.isascii() and "=?" not in text and all(len(word) <= _LINE - _LONGEST_NAME for word in text.split(" "))
    return _folded(name, text) if plain else _folded(name, _encoded_words(text))


def _phrase(header: str, name: str, address: str) -> str:
    """A header of one address, with a name beside it that can't be read as anything else."""
    name = _one_line(name)
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
    if any(len(line) > _HARD_LINE for line in lines):
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
    return " ".join("".join(character if character.isprintable() else " " for character in text).split())


def _bracketed(token: str) -> str:
    return f"<{_checked(token.removeprefix('<').removesuffix('>'), 'id')}>"


def _checked(token: str, what: str) -> str:
    if not _ONE_TOKEN.fullmatch(token) or "<" in token or ">" in token or len(token) > _HARD_LINE - 3:
        raise Refused(f"this {what} can't stand in a mail header: {token[:80]!r}")
    return token
