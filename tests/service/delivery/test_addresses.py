"""Addresses as they go on the wire."""

import pytest

from service.delivery.addresses import on_the_wire
from service.errors import Refused


@pytest.mark.parametrize(
    ("address", "wire"),
    [
        ("a.b+c@example.org", "a.b+c@example.org"),
        ("ops@localhost", "ops@localhost"),
        ("jürgen@example.org", "jürgen@example.org"),
        ("x@bücher.example", "x@xn--bcher-kva.example"),  # the known example of RFC 3492's encoding
    ],
)
def test_a_usable_address(address: str, wire: str) -> None:
    assert on_the_wire(address) == wire


@pytest.mark.parametrize(
    "address",
    [
        *("", "a", "@b.example", "a@", "a@b@c", "a b@c.example", "a@b.example\n", "a@b.example>", "<a@b.example>"),
        *('"a"@b.example', "a@[127.0.0.1]", "a,b@c.example", "a\x00@b.example"),
        *("a@" + "ü" * 70 + ".example", "a" * 250 + "@b.example"),
    ],
)
def test_an_address_that_could_break_out_is_refused(address: str) -> None:
    with pytest.raises(Refused, match="not an address"):
        on_the_wire(address)
