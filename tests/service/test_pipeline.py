"""The whole week through the pipeline, on both stores, over a real SMTP server and real pages."""

import re
import urllib.request
from dataclasses import replace
from datetime import timedelta
from email import message_from_bytes, policy
from pathlib import Path

import pytest

from service import mailing, pipeline
from service import settings as settings_file
from service.clock import SetClock
from service.errors import Refused, UnsafeText, WrongState
from service.settings import MailSettings, Settings, WebSettings
from service.store import audit, editions, jobs, network, outbox
from service.store.base import Store
from service.tokens import Tokens
from service.web.app import make_app
from tests import small_network
from tests.builders import a_subscriber
from tests.service.web.site import running

ID = "north-2026-W20"
READERS = 7


def sent_week(store: Store, settings: Settings, clock: SetClock, folder: Path) -> list[bytes]:
    """Draft, sign, send; the raw mails that arrived."""
    pipeline.draft(store, "north", clock=clock)
    pipeline.sign(store, settings, ID, by="ivy", clock=clock, note="Good rain on the north side.")
    with pipeline.mail_server(folder) as server:
        mail = MailSettings(port=server.port, starttls="never", sender="digest@example.org")
        counts = pipeline.send(store, settings.model_copy(update={"mail": mail}), ID, clock=clock)
    assert counts["sent"] == READERS
    return [file.read_bytes() for file in sorted((folder / "new").iterdir())]


def test_a_week_from_rows_to_mail(full: Store, settings: Settings, clock: SetClock, tmp_path: Path) -> None:
    mails = sent_week(full, settings, clock, tmp_path / "mail")
    owner = _words(next(mail for mail in mails if b"s1@example.org" in mail))
    assert "At or above the number: this is a reason to talk to your adviser, not a decision." in owner
    assert "Ivy Tern" in owner
    other = _words(next(mail for mail in mails if b"s7@example.org" in mail))
    assert "found in 2 of 6 looks" in other.lower()
    assert "Kittiwake" not in other
    page = mailing.digest_page(full, ID, "s7", pipeline.book_of(full, ID), _no_links(settings, clock))
    assert "The weather this hatch needs has likely come" in page
    with full.reading() as c:
        assert outbox.counts(c, ID)["sent"] == READERS


def test_sending_again_sends_nothing_twice(full: Store, settings: Settings, clock: SetClock, tmp_path: Path) -> None:
    sent_week(full, settings, clock, tmp_path / "mail")
    with pipeline.mail_server(tmp_path / "again") as server:
        mail = MailSettings(port=server.port, starttls="never")
        again = pipeline.send(full, settings.model_copy(update={"mail": mail}), ID, clock=clock)
    assert again["sent"] == 0
    assert not list((tmp_path / "again").glob("new/*"))


def test_every_link_of_every_mail_opens(full: Store, settings: Settings, clock: SetClock, tmp_path: Path) -> None:
    with running(make_app(pipeline.Pages(full, settings), clock)) as url:
        mails = sent_week(
            full, settings.model_copy(update={"web": WebSettings(base_url=url)}), clock, tmp_path / "mail"
        )
        links = {link for mail in mails for link in _links(mail)}
        assert len(links) == 2 * READERS  # to show, and to leave
        for link in links:
            with urllib.request.urlopen(link) as answer:
                assert answer.status == 200
        with full.reading() as c:
            assert len(network.subscribers(c, "north")) == READERS, "opening links must change nothing"
        way_out = next(link for link in sorted(links) if "/unsubscribe/" in link)
        request = urllib.request.Request(way_out, data=b"List-Unsubscribe=One-Click", method="POST")
        for _ in range(2):
            with urllib.request.urlopen(request) as answer:
                assert answer.status == 200
        with full.reading() as c:
            assert len(network.subscribers(c, "north")) == READERS - 1


def test_the_way_out_stops_all_mail_to_the_address_and_to_no_other(
    full: Store, settings: Settings, clock: SetClock
) -> None:
    """The page says that no more digests come to this address; it may be known under several ids."""
    with full.writing() as c:
        network.save_subscribers(c, [a_subscriber("t3", email="S3@Example.org"), a_subscriber("t4", email="s3@e.org")])
    token = Tokens(settings_file.keys(settings)).make("unsubscribe", "s3", clock.now())
    for _ in range(2):
        pipeline.Pages(full, settings).unsubscribe(token, clock.now())
    with full.reading() as c:
        assert {each.id for each in network.subscribers(c, "north", "left")} == {"s3", "t3"}
        assert [each.subject for each in audit.entries(c, what="unsubscribe")] == ["s3", "t3"]


def test_who_left_after_signing_gets_no_mail(full: Store, settings: Settings, clock: SetClock, tmp_path: Path) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    with full.writing() as c:
        network.set_subscriber_state(c, "s3", "left")
    with pipeline.mail_server(tmp_path / "mail") as server:
        mail = MailSettings(port=server.port, starttls="never")
        counts = pipeline.send(full, settings.model_copy(update={"mail": mail}), ID, clock=clock)
    assert (counts["sent"], counts["skipped"]) == (READERS - 1, 1)


# --- deciding -----------------------------------------------------------------------------------


def test_only_who_may_decide_can_sign(full: Store, settings: Settings, clock: SetClock) -> None:
    pipeline.draft(full, "north", clock=clock)
    with pytest.raises(Refused, match="who may: ivy"):
        pipeline.sign(full, settings, ID, by="grower1", clock=clock)


def test_a_held_edition_is_not_signed_until_the_hold_is_lifted(
    full: Store, settings: Settings, clock: SetClock
) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.hold(full, ID, None, by="ivy", reason="waiting for the lab", clock=clock)
    with pytest.raises(WrongState, match="held"):
        pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    pipeline.hold(full, ID, None, by="ivy", reason="the lab answered", clock=clock, lift=True)
    assert pipeline.sign(full, settings, ID, by="ivy", clock=clock)["slips"] == READERS


def test_a_held_statement_reaches_nobody(full: Store, settings: Settings, clock: SetClock) -> None:
    pipeline.draft(full, "north", clock=clock)
    listed = pipeline.show(full, ID)["statements"]
    hatch = next(each for each in listed if "hatch needs" in each["says"])
    assert hatch["readers"] > 1
    pipeline.hold(full, ID, hatch["statement"], by="ivy", reason="the buoys disagree", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    for i in range(1, READERS + 1):
        assert "hatch needs" not in pipeline.show(full, ID, reader=f"s{i}")["digest"]


@pytest.mark.parametrize(
    "note",
    [
        "Put on 200 mL/ha tonight",
        "No risk in the south this week",
        "Ask Wren Gannet2 what she saw",
        "Kittiwake 4 is crawling",
        "Ring me on 0412 345 678",
        "See the edition draft",
    ],
)
def test_an_unsafe_note_stops_the_signing(full: Store, settings: Settings, clock: SetClock, note: str) -> None:
    pipeline.draft(full, "north", clock=clock)
    with pytest.raises(UnsafeText) as caught:
        pipeline.sign(full, settings, ID, by="ivy", clock=clock, note=note)
    assert caught.value.marks
    with full.reading() as c:
        assert editions.get(c, ID).state == "draft"
        assert sum(outbox.counts(c, ID).values()) == 0


def test_a_note_is_a_few_words(full: Store, settings: Settings, clock: SetClock) -> None:
    pipeline.draft(full, "north", clock=clock)
    with pytest.raises(Refused, match="shorten it to 1500"):
        pipeline.sign(full, settings, ID, by="ivy", clock=clock, note="Fog. " * 301)
    assert pipeline.sign(full, settings, ID, by="ivy", clock=clock, note="Fog. " * 300)["slips"] == READERS


def test_an_unsigned_edition_is_not_sent(full: Store, settings: Settings, clock: SetClock) -> None:
    pipeline.draft(full, "north", clock=clock)
    with pytest.raises(WrongState, match="signed"):
        pipeline.send(full, settings, ID, clock=clock)


def _no_links(settings: Settings, clock: SetClock) -> mailing.Links:
    return mailing.Links(settings, Tokens(["k" * 40]), clock.now())


def _words(mail: bytes) -> str:
    body = message_from_bytes(mail, policy=policy.default).get_body(("plain",))
    assert body is not None
    return str(body.get_content())


def _links(mail: bytes) -> set[str]:
    parsed = message_from_bytes(mail, policy=policy.default)
    found = {str(parsed["List-Unsubscribe"]).strip("<> ")}
    for part in parsed.walk():
        if part.get_content_maintype() == "text":
            found |= set(re.findall(r"http://127\.0\.0\.1:\d+/[\w/.-]+", part.get_content()))
    return found


def test_a_step_that_another_process_is_at_says_so(full: Store, clock: SetClock) -> None:
    with full.writing() as c:
        day = small_network.CUT_OFF.date()
        jobs.claim(c, "draft", "north", day, now=clock.now(), lasts=timedelta(minutes=10))
    with pytest.raises(WrongState, match="02:40 UTC"):
        pipeline.draft(full, "north", clock=clock)
    clock.set(small_network.CUT_OFF + timedelta(minutes=11))
    assert pipeline.draft(full, "north", clock=clock)["readers"] == READERS


def test_a_name_that_came_after_the_draft_stops_the_signing_too(
    full: Store, settings: Settings, clock: SetClock
) -> None:
    pipeline.draft(full, "north", clock=clock)
    clock.set(small_network.CUT_OFF + timedelta(hours=20))
    with full.writing() as c:
        network.save_paddocks(c, [replace(small_network.paddocks()[0], name="Fulmar Rise")], clock.now())
    with pytest.raises(UnsafeText, match="Fulmar Rise"):
        pipeline.sign(full, settings, ID, by="ivy", clock=clock, note="Fulmar Rise was crawling on Monday")
