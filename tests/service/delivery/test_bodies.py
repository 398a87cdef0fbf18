"""Bodies of mail: from parts that are kept ready come the bytes that the body as a whole gives."""

import copy
import pickle
from email import message_from_bytes

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rules.slip import SHOW_LINK, UNSUBSCRIBE_LINK, Joined, SlipView
from service.delivery import bodies
from service.editions.render import render
from service.errors import Refused
from tests.service.editions.views import a_quiet_view, a_view


def links(show: str = "https://a.example/show/s", leave: str = "https://a.example/leave/u") -> dict[bytes, bytes]:
    return {SHOW_LINK.encode(): show.encode(), UNSUBSCRIBE_LINK.encode(): leave.encode()}


def whole(text: str, given_links: dict[bytes, bytes]) -> bytes:
    """The body of a text that knows no parts."""
    assert not isinstance(text, Joined)
    return b"".join(bodies.body("html", text, given_links))


SHORT = [
    "Look",
    " ",
    "\t",
    "\n",
    "\r\n",
    "\r",
    ".",
    "=",
    "_",
    "=_",
    "é",
    "🌾",
    "\x00",
    "-",
    SHOW_LINK,
    UNSUBSCRIBE_LINK,
]
words = st.sampled_from([*SHORT, "x" * 300, "y" * 900])
parts = st.lists(st.lists(words, max_size=8).map("".join), max_size=6)
lines = st.lists(st.lists(words, max_size=8).map(lambda made: "".join(made) + "\n"), max_size=6)
urls = st.sampled_from(["https://a.example/s", "u" * 60, "u" * 900, "_a", "a=", "a=_b", "."])


@settings(deadline=None, max_examples=400)
@given(made=parts | lines, show=urls, leave=urls)
def test_parts_give_the_bytes_of_the_whole(made: list[str], show: str, leave: str) -> None:
    text = Joined(made)
    assert b"".join(bodies.body("html", text, links(show, leave))) == whole(str(text), links(show, leave))


@pytest.mark.parametrize("view", [a_view(), a_quiet_view()])
def test_digests_are_put_together_from_parts(view: SlipView) -> None:
    made = render(view)
    for text in (made.text, made.html):
        assert bodies._from_parts(text, links()) is not None
        assert b"".join(bodies.body("html", text, links())) == whole(str(text), links())


@pytest.mark.parametrize("text", ["a {{link:answer}}\n", Joined(["a {{link:answer}}\n"]), Joined(["{{li", "nk:x}}\n"])])
def test_a_placeholder_that_no_link_belongs_to_is_refused(text: str) -> None:
    with pytest.raises(Refused, match="left over"):
        bodies.body("plain", text, links())


@pytest.mark.parametrize("text", ["a =_0 b\n", f"a {SHOW_LINK}\n", f"a={SHOW_LINK}\n", f"{SHOW_LINK}_\n"])
@pytest.mark.parametrize("url", ["https://a.example/?q=_0", "_q", "q="])
def test_no_body_holds_what_a_boundary_begins_with(text: str, url: str) -> None:
    for each in (text, Joined([text])):
        data = b"".join(bodies.body("plain", each, links(url)))
        assert bodies.MARK not in data
        payload = message_from_bytes(data).get_payload(decode=True)
        assert payload == text.replace(SHOW_LINK, url).replace("\n", "\r\n").encode()


def test_a_joined_text_travels_with_its_parts() -> None:
    text = Joined(["a\n", "b\n"])
    for again in (copy.copy(text), copy.deepcopy(text), pickle.loads(pickle.dumps(text))):
        assert (again, again.parts) == ("a\nb\n", ("a\n", "b\n"))
