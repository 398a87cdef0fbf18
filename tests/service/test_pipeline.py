"""The whole week through the pipeline, on both stores, over a real SMTP server and real pages."""

import re
import urllib.request
from dataclasses import replace
from datetime import datetime, timedelta
from email import message_from_bytes, policy
from pathlib import Path
from typing import Any

import pytest
from sqlalchemy import text

from rules.records import Observation, Paddock, StationDay
from service import mailing, pipeline
from service import settings as settings_file
from service.clock import SetClock
from service.errors import NotFound, Refused, UnsafeText, WrongState
from service.settings import MailSettings, Settings, WebSettings
from service.store import audit, editions, jobs, network, observations, outbox
from service.store import weather as weather_store
from service.store.base import Store
from service.tokens import Tokens
from service.web.app import make_app
from tests import small_network
from tests.builders import a_subscriber
from tests.service.web.site import running

ID = "north-2026-W20"
READERS = 7


@pytest.fixture
def clock() -> SetClock:
    return SetClock(small_network.CUT_OFF)


@pytest.fixture
def full(store: Store) -> Store:
    small_network.fill(store)
    return store


@pytest.fixture
def settings(tmp_path: Path) -> Settings:
    return Settings(data_dir=str(tmp_path), keys_file=str(tmp_path / "keys"))


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


# --- the trail ----------------------------------------------------------------------------------


def test_a_sentence_leads_back_to_its_rows(full: Store, settings: Settings, clock: SetClock) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    found = pipeline.trail(full, ID, "s1", sentence="hatch needs")
    assert found["equal"], found["compared"]
    (hatch,) = found["sentences"][:1]
    assert hatch["figures"]["rain_mm"] == pytest.approx(9.0)
    assert any("redlegged_earth_mite" in rule for rule in hatch["rules"])
    stations = {row["id"].partition("/")[0] for row in hatch["rows"]}
    assert stations == {"buoy1", "buoy2"}
    assert all(row["now"] == "same" and row["km"] > 0 for row in hatch["rows"])
    counted = pipeline.trail(full, ID, "s1", sentence="Kittiwake 1")["sentences"]
    assert "csv:1" in {row["id"] for each in counted for row in each.get("rows", [])}


def test_every_digest_is_said_again_to_equal_bytes(full: Store, settings: Settings, clock: SetClock) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    clock.set(small_network.CUT_OFF + timedelta(days=30))
    for i in range(1, READERS + 1):
        found = pipeline.trail(full, ID, f"s{i}")
        assert found["equal"], found["compared"]


@pytest.mark.parametrize(
    ("change", "named"),
    [
        ("UPDATE observation SET spot_counts = '1;1;1;1;1;1;1;1' WHERE key = 'csv:1'", "csv:1"),
        ("UPDATE observation SET note = 'quietly added' WHERE key = 'csv:2'", "csv:2"),
        ("UPDATE station_day SET rain = 8.5 WHERE station = 'buoy1' AND day = '2026-04-12'", "buoy1/2026-04-12"),
        ("DELETE FROM observation WHERE key = 'csv:2'", "csv:2"),
        ("UPDATE paddock SET up_on = NULL WHERE id = 'p1'", "p1"),
    ],
)
def test_one_altered_row_is_found_and_named(
    full: Store, settings: Settings, clock: SetClock, change: str, named: str
) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    with full.writing() as c:
        assert c.execute(text(change)).rowcount == 1
    found = pipeline.trail(full, ID, "s1")
    assert not found["equal"]
    assert named in {row["id"] for row in found["altered_rows"]}


def test_an_altered_statement_is_found(full: Store, settings: Settings, clock: SetClock) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    with full.writing() as c:
        hatch = next(each for each in editions.statements(c, ID).values() if each.kind == "hatch")
        body = "SELECT body FROM statement WHERE hash = :hash"
        kept = c.execute(text(f"SELECT CAST(({body}) AS TEXT)"), {"hash": hatch.hash}).scalar_one()
        other = kept.replace('"rain_mm": 9.0', '"rain_mm": 19.0')
        assert other != kept
        cast = ":body" if full.is_sqlite else "CAST(:body AS JSON)"
        c.execute(text(f"UPDATE statement SET body = {cast} WHERE hash = :hash"), {"hash": hatch.hash, "body": other})
    assert pipeline.trail(full, ID, "s1")["altered_statements"] == [hatch.hash]


def test_a_deleted_reader_leaves_no_trail_and_the_trail_says_so(
    full: Store, settings: Settings, clock: SetClock
) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    with full.writing() as c:
        editions.delete_reader(c, "s2")
    with pytest.raises(NotFound, match="deleted"):
        pipeline.trail(full, ID, "s2")


# --- no peeking ---------------------------------------------------------------------------------


def test_rows_knowable_later_change_nothing_of_a_draft(full: Store, clock: SetClock) -> None:
    """Rows are appended and altered (new versions) after the cut-off; the draft of that moment stays as it was."""
    before = _drafted(full, clock)
    _add_later_rows(full)
    assert _drafted(full, clock) == before
    clock.set(small_network.CUT_OFF + timedelta(days=3))
    assert _drafted(full, clock) != before, "the later rows must matter once they are knowable"


def _drafted(store: Store, clock: SetClock) -> tuple[object, ...]:
    pipeline.draft(store, "north", clock=clock)
    with store.reading() as c:
        kept = [each for piece in editions.slips(c, ID) for each in piece]
        return editions.statements(c, ID), [slip for slip, _ in kept], pipeline.run_rules(store, "north", clock=clock)


def _add_later_rows(store: Store) -> None:
    later = small_network.CUT_OFF + timedelta(days=1)
    fields = small_network.paddocks()
    new = [small_network.look(f"csv:9{i}", fields[i], "grower2", found=True, counts=(500.0,) * 8) for i in range(6)]
    altered = small_network.look("csv:1", fields[0], "grower1", found=False)
    with store.writing() as c:
        observations.add(c, [_at_time(each, later) for each in new])
        observations.add(c, [_at_time(altered, later, version=2)])
        wetter = [each for each in small_network.station_days() if each.day.month == 4]
        weather_store.add_station_days(c, [_corrected(each, later) for each in wetter])
        network.save_paddocks(c, [_resown(each) for each in fields], later)


def _at_time(row: Observation, at: datetime, **more: Any) -> Observation:
    return replace(row, arrived_at=at, knowable_from=at, **more)


def _corrected(day: StationDay, at: datetime) -> StationDay:
    changed = replace(day, version=2, tmin=2.0, tmax=9.0, rain=40.0, arrived_at=at, knowable_from=at)
    return replace(changed, digest=weather_store.content_digest(changed))


def _resown(field: Paddock) -> Paddock:
    return replace(field, crop="wheat", up_on=None, seed_dressing=True)


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
