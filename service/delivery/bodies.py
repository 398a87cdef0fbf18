"""The text and the HTML of a message as lines of mail: CRLF between them, and nothing but ASCII (RFC 2045).

A body that still knows its parts (`Joined`) is put together from lines that were made ready once for all
messages that share the part; the bytes are those that the body as a whole would give.
"""

import binascii
import re
from collections.abc import Mapping, Sequence
from functools import lru_cache
from typing import NamedTuple

from rules.slip import SHOW_LINK, UNSUBSCRIBE_LINK, Joined
from service.errors import Refused

MARK = b"=_"  # what boundaries begin with: no body holds it, since quoted-printable can't (section 6.7)
HARD_LINE = 998  # longest line that RFC 5322 section 2.1.1 allows, without CRLF
_KEPT = 4_000  # parts that are kept ready, at about 2 kB each
_PRINTABLE = bytes([*b"\t\r\n", *range(0x20, 0x7F)])
_LINK = b"{{link:"  # how a placeholder begins
_PLACEHOLDER = re.compile(b"(%s|%s)" % (re.escape(SHOW_LINK.encode()), re.escape(UNSUBSCRIBE_LINK.encode())))

Links = Mapping[bytes, bytes]  # by placeholder, as they stand in one body


class _Part(NamedTuple):
    """Some lines of a body, ready for every message that holds them, but for their links."""

    pieces: Sequence[bytes]  # text and placeholders in turn
    width: int  # of its longest line, less the links


def body(subtype: str, text: str, links: Links) -> list[bytes]:
    """A body with its own headers: as it is where it can travel so, else quoted-printable (RFC 2045)."""
    charset, encoding = b"us-ascii", b"7bit"
    as_it_is, lines = _from_parts(text, links) or _as_a_whole(text, links)
    if not as_it_is:
        charset, encoding = b"utf-8", b"quoted-printable"
    kind = b"Content-Type: text/" + subtype.encode() + b"; charset=" + charset
    return [kind + b"\r\nContent-Transfer-Encoding: " + encoding + b"\r\n\r\n", *lines]


def _as_a_whole(text: str, links: Links) -> tuple[bool, list[bytes]]:
    """Whether a body travels as it is, and its lines on the way."""
    pieces = _cut(_in_lines(text))
    if any(_LINK in piece for piece in pieces[::2]):
        raise Refused("a link placeholder is left over that no link belongs to")
    data = _linked(pieces, links)
    if not data.endswith(b"\r\n"):
        data += b"\r\n"
    return (True, [data]) if _width(data) <= HARD_LINE else (False, [_encoded(data)])


def _from_parts(text: str, links: Links) -> tuple[bool, list[bytes]] | None:
    """The same from parts that are ready; None where it can't be said of each part by itself."""
    parts = [_ready(part) for part in text.parts] if isinstance(text, Joined) else []
    known = [part for part in parts if part is not None]
    if not parts or len(known) < len(parts):
        return None
    if max([part.width for part in known]) > HARD_LINE:
        return False, [_encoded_part(part, links) for part in known]
    longest = max(map(len, links.values()))
    if max([part.width + len(part.pieces) // 2 * longest for part in known]) > HARD_LINE:  # perhaps, then
        return None
    if any(MARK in b"=" + url + b"_" for url in links.values()):  # with what stands beside a link
        return None
    return True, [links.get(piece, piece) for part in known for piece in part.pieces]


@lru_cache(maxsize=_KEPT)
def _ready(text: str) -> _Part | None:
    """A part made ready; None where it ends amid a line or holds a placeholder that no link belongs to."""
    pieces = _cut(_in_lines(text))
    if not text.endswith("\n") or any(_LINK in piece for piece in pieces[::2]):
        return None
    return _Part(pieces, _width(b"-".join(pieces[::2])))  # a link is not a space that ends a line


def _in_lines(text: str) -> bytes:
    if "\r" in text:
        text = text.replace("\r\n", "\n").replace("\r", "\n")
    return text.replace("\n", "\r\n").encode()


def _cut(lines: bytes) -> list[bytes]:
    """Text and placeholders in turn."""
    return _PLACEHOLDER.split(lines) if _LINK in lines else [lines]


def _linked(pieces: Sequence[bytes], links: Links) -> bytes:
    return b"".join([links.get(piece, piece) for piece in pieces])


def _encoded(data: bytes) -> bytes:
    return binascii.b2a_qp(data, istext=True)


def _encoded_part(part: _Part, links: Links) -> bytes:
    """A part's lines, which are encoded one by one."""
    return _encoded(_linked(part.pieces, links)) if len(part.pieces) > 1 else _encoded_once(part.pieces[0])


_encoded_once = lru_cache(maxsize=_KEPT)(_encoded)


def _width(data: bytes) -> int:
    """The longest line; too long for any where a line must be encoded for another reason.

    That is more than printable ASCII, space at its end (RFC 2045 sections 2.7 and 6.7), or what boundaries
    begin with.
    """
    if data.translate(None, _PRINTABLE) or b" \r\n" in data or b"\t\r\n" in data or MARK in data:
        return HARD_LINE + 1
    return max(map(len, data.split(b"\r\n")))
