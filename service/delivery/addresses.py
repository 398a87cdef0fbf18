"""Which mail addresses can be used, and how they look on the wire."""

import re

from service.errors import Refused

_LONGEST = 254  # RFC 5321 section 4.5.3.1.3, less the angle brackets [octets]
_SHAPE = re.compile(r"[^\s<>\"\\(),:;@\[\]\x00-\x20\x7f]+@[^\s<>\"\\(),:;@\[\]\x00-\x20\x7f]+")


def on_the_wire(address: str) -> str:
    """An address with its domain in ASCII; Refused where it could break out of a command or a header."""
    if _SHAPE.fullmatch(address) and address.isprintable():
        local, _, domain = address.rpartition("@")
        wire = f"{local}@{_ascii(domain)}"
        if _ascii(domain) and len(wire.encode()) <= _LONGEST:
            return wire
    raise Refused(f"this is not an address that mail can go to: {address[:80]!r}; mend it in the list of subscribers")


def _ascii(domain: str) -> str:
    if domain.isascii():
        return domain
    try:
        return domain.encode("idna").decode("ascii")
    except UnicodeError:
        return ""
