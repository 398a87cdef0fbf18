"""Messages as bytes: the same content as the standard library's own, and raw bytes that can be relied on."""

import re
from datetime import UTC, datetime
from email import message_from_bytes, policy
from email.header import decode_header, make_header
from email.message import EmailMessage
from email.parser import BytesParser
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rules.slip import SHOW_LINK, UNSUBSCRIBE_LINK, Rendered
from service.delivery import mime
from service.errors import Refused

SHOW = "https://leafturn.example/show/" + "s" * 90 + "?a=1&b=2"
LEAVE = "https://leafturn.example/leave/" + "u" * 150
TEXT = f"Look at your canola – today.\n\nSee it whole: {SHOW_LINK}\nLeave: {UNSUBSCRIBE_LINK}\n"
PAGE = f'<p>Look at your canola – today.</p>\n<p><a href="{SHOW_LINK}">See it whole</a></p>\n'


def built(subject: str = "What to look at this week", text: str = TEXT, html: str = PAGE, **changes: Any) -> bytes:
    values: dict[str, Any] = {
        "rendered": Rendered(subject, text, html),
        "sender": "digest@leafturn.example",
        "sender_name": "North Bank digest",
        "recipient": "reader@example.org",
        "message_id": "<0123456789abcdef@leafturn.example>",
        "date": datetime(2026, 5, 12, 2, 0, tzinfo=UTC),
        "show_url": SHOW,
        "unsubscribe_url": LEAVE,
        "list_id": "north.leafturn.example",
    }
    return mime.build(**(values | changes))


def parsed(data: bytes) -> EmailMessage:
    message = BytesParser(policy=policy.default).parsebytes(data)
    assert isinstance(message, EmailMessage)
    assert not [part.defects for part in message.walk() if part.defects]
    return message


def content(message: EmailMessage, subtype: str) -> list[str]:
    part = message.get_body((subtype,))
    assert part is not None
    return part.get_content().splitlines()


def test_every_header_is_there_and_reads_back() -> None:
    message = parsed(built())
    assert message["From"].addresses[0].display_name == "North Bank digest"
    assert message["From"].addresses[0].addr_spec == "digest@leafturn.example"
    assert message["To"] == "reader@example.org"
    assert message["Subject"] == "What to look at this week"
    assert message["Date"].datetime == datetime(2026, 5, 12, 2, 0, tzinfo=UTC)
    assert message["Message-ID"] == "<0123456789abcdef@leafturn.example>"
    assert message["List-Id"] == "<north.leafturn.example>"
    assert message["Auto-Submitted"] == "auto-generated"  # RFC 3834
    assert message["MIME-Version"] == "1.0"
    assert message.get_content_type() == "multipart/alternative"
    assert [part.get_content_type() for part in message.iter_parts()] == ["text/plain", "text/html"]


def test_content_equals_that_of_the_standard_library() -> None:
    other = EmailMessage()
    other["Subject"] = "Look – now"
    other.set_content(TEXT.replace(SHOW_LINK, SHOW).replace(UNSUBSCRIBE_LINK, LEAVE))
    other.add_alternative(PAGE.replace(SHOW_LINK, SHOW.replace("&", "&amp;")), subtype="html")
    theirs = parsed(other.as_bytes(policy=policy.SMTP))
    ours = parsed(built("Look – now"))
    assert ours["Subject"] == theirs["Subject"]
    for subtype in ("plain", "html"):
        assert content(ours, subtype) == content(theirs, subtype)


def test_a_long_way_out_stays_one_link_in_the_raw_bytes() -> None:
    """RFC 8058 wants the header as it is; a re-parsed header would hide encoded words."""
    head, _, _ = built().partition(b"\r\n\r\n")
    unfolded = head.replace(b"\r\n ", b" ")
    [line] = re.findall(rb"^List-Unsubscribe: .*", unfolded, re.MULTILINE)
    assert line.split() == [b"List-Unsubscribe:", b"<" + LEAVE.encode() + b">"]
    assert b"\r\nList-Unsubscribe-Post: List-Unsubscribe=One-Click\r\n" in head
    assert b"=?" not in head


@pytest.mark.parametrize("url", ["https://leafturn.example/leave/" + "u" * length for length in (10, 40, 60, 900)])
def test_no_line_of_the_header_is_too_long(url: str) -> None:
    head, _, _ = built(unsubscribe_url=url).partition(b"\r\n\r\n")
    lines = head.split(b"\r\n")
    assert all(len(line) <= 998 for line in lines)  # RFC 5322 section 2.1.1
    assert all(len(line) <= 78 or line == f" <{url}>".encode() for line in lines)


def test_a_link_too_long_for_any_line_is_refused() -> None:
    with pytest.raises(Refused, match="can't stand in a mail header"):
        built(unsubscribe_url="https://leafturn.example/" + "u" * 1000)


NASTY = "Look\r\nBcc: other@example.org\r\n\r\nbody"


@pytest.mark.parametrize("changes", [{"subject": NASTY}, {"sender_name": NASTY}, {"sender_name": '"; x <a@b.example>'}])
def test_free_text_can_not_make_a_header(changes: dict[str, str]) -> None:
    message = parsed(built(**changes))
    assert len(message.keys()) == len(parsed(built()).keys())
    assert message["Bcc"] is None
    assert len(message["From"].addresses) == 1
    assert message["From"].addresses[0].addr_spec == "digest@leafturn.example"


@pytest.mark.parametrize("field", ["sender", "recipient", "message_id", "list_id", "show_url", "unsubscribe_url"])
@pytest.mark.parametrize("value", ["a@b.example\r\nBcc: c@d.example", "a@b.example>, <c@d.example", "a @b.example", ""])
def test_nothing_breaks_out_of_an_address_an_id_or_a_link(field: str, value: str) -> None:
    with pytest.raises(Refused):
        built(**{field: value})


def test_a_link_that_is_left_over_is_refused() -> None:
    with pytest.raises(Refused, match="left over"):
        built(text="Answer: {{link:answer}}")


def test_plain_text_alone_is_not_wrapped() -> None:
    data = built(text="Look.\n", html="")
    message = parsed(data)
    assert message.get_content_type() == "text/plain"
    assert data.endswith(b"Content-Transfer-Encoding: 7bit\r\n\r\nLook.\r\n")


def test_a_boundary_is_never_part_of_the_text() -> None:
    found = re.search(rb'boundary="([^"]+)"', built())
    assert found is not None
    text = f"--{found[1].decode()}--\nLook.\n"
    assert content(parsed(built(text=text)), "plain") == text.splitlines()


def test_names_outside_ascii_and_with_specials_read_back() -> None:
    for name in ("Läftürn", "Bank, North", 'the "North" bank', "a\\b", "=?utf-8?q?x?=", ""):
        assert parsed(built(sender_name=name))["From"].addresses[0].display_name == name


def test_a_name_of_many_encoded_words_reads_back() -> None:
    """Read by the older decoder: the newer one keeps the space between encoded words of a name."""
    header = message_from_bytes(built(sender_name="é" * 100))["From"]
    assert str(make_header(decode_header(header))) == "é" * 100 + " <digest@leafturn.example>"


def test_a_domain_outside_ascii_is_written_in_ascii() -> None:
    assert b"\r\nTo: reader@xn--bcher-kva.example\r\n" in built(recipient="reader@bücher.example")  # RFC 3492's form


def test_a_mailbox_outside_ascii_is_written_as_it_is() -> None:
    data = built(recipient="jürgen@example.org")  # RFC 6532
    assert message_from_bytes(data, policy=policy.SMTPUTF8)["To"] == "jürgen@example.org"


words = st.text(st.characters(exclude_categories=["Cs", "Cc"]) | st.sampled_from("\t\n."), max_size=400)


@settings(deadline=None)
@given(subject=words, text=words, html=words)
def test_any_text_reads_back_and_travels_in_short_ascii_lines(subject: str, text: str, html: str) -> None:
    data = built(subject, text, html + "<p>")
    message = parsed(data)
    assert message["Subject"] == mime._one_line(subject)
    assert "\r\n".join(_lines(message, "plain")) == _as_lines(text)
    assert "\r\n".join(_lines(message, "html")) == _as_lines(html + "<p>")
    assert data.isascii()
    assert b"\n" not in data.replace(b"\r\n", b"")
    assert b"\r" not in data.replace(b"\r\n", b"")
    body = data.partition(b"\r\n\r\n")[2]
    assert max(len(line) for line in body.split(b"\r\n")) <= 998  # RFC 5322 section 2.1.1


def _lines(message: EmailMessage, subtype: str) -> list[str]:
    part = message.get_body((subtype,))
    assert part is not None
    payload = part.get_payload(decode=True)
    assert isinstance(payload, bytes)
    return payload.decode().split("\r\n")


def _as_lines(text: str) -> str:
    text = text.replace("\r\n", "\n").replace("\r", "\n").replace("\n", "\r\n")
    return text if text.endswith("\r\n") else text + "\r\n"
