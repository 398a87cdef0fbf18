"""Signing and sending while somebody else decides, or after the program changed: nothing is said that was not read."""

from pathlib import Path

import pytest
from sqlalchemy import select, update

from service import pipeline
from service.clock import SetClock
from service.errors import WrongState
from service.settings import MailSettings, Settings
from service.store import editions, outbox
from service.store.base import Store

ID = "north-2026-W20"
READERS = 7


def test_what_is_held_while_it_is_being_signed_stops_the_signing(
    full: Store, settings: Settings, clock: SetClock
) -> None:
    """A hold that came too late for the digests must not be on record beside digests that say the thing."""
    pipeline.draft(full, "north", clock=clock)
    listed = pipeline.show(full, ID)["statements"]
    hatch = next(each["statement"] for each in listed if "hatch needs" in each["says"])

    def meanwhile(done: int, total: int | None, what: str) -> None:
        if done == total:
            pipeline.hold(full, ID, hatch, by="ivy", reason="the buoys disagree", clock=clock)

    with pytest.raises(WrongState, match="someone else"):
        pipeline.sign(full, settings, ID, by="ivy", clock=clock, progress=meanwhile)
    with full.reading() as c:
        assert editions.get(c, ID).state == "draft"
        assert set(editions.held(c, ID)) == {hatch}
    assert pipeline.sign(full, settings, ID, by="ivy", clock=clock)["held"] == 1


def test_of_two_who_sign_with_other_notes_one_is_told_and_all_is_sent(
    full: Store, settings: Settings, clock: SetClock, tmp_path: Path
) -> None:
    pipeline.draft(full, "north", clock=clock)

    def meanwhile(done: int, total: int | None, what: str) -> None:
        if done == total:
            pipeline.sign(full, settings, ID, by="ivy", clock=clock, note="Fog on the north side.")

    with pytest.raises(WrongState, match="someone else"):
        pipeline.sign(full, settings, ID, by="ivy", clock=clock, note="Rain on the south side.", progress=meanwhile)
    with pipeline.mail_server(tmp_path / "mail") as server:
        mail = MailSettings(port=server.port, starttls="never")
        assert pipeline.send(full, settings.model_copy(update={"mail": mail}), ID, clock=clock)["sent"] == READERS
    assert all(b"Fog on" in file.read_bytes() for file in (tmp_path / "mail" / "new").iterdir())


@pytest.mark.parametrize("begun", [False, True], ids=["signed", "half sent"])
def test_another_version_than_the_one_that_signed_sends_nothing_and_fails_nothing(
    full: Store, settings: Settings, clock: SetClock, begun: bool
) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    with full.writing() as c:
        other = editions.get(c, ID).hashes | {"templates": "of another version"}
        c.execute(update(editions.edition).where(editions.edition.c.id == ID).values(hashes=other))
        if begun:
            editions.mark_sent(c, ID, by="ivy", at=clock.now())
    with pytest.raises(WrongState, match=r"templates changed; nothing was sent"):
        pipeline.send(full, settings, ID, clock=clock)
    with full.reading() as c:
        assert outbox.counts(c, ID)["queued"] == READERS
        assert editions.get(c, ID).state == ("sent" if begun else "signed")


@pytest.mark.parametrize("altered", [READERS, 1], ids=["all", "one"])
def test_a_program_that_says_all_of_it_otherwise_sends_nothing(
    full: Store, settings: Settings, clock: SetClock, tmp_path: Path, altered: int
) -> None:
    """One digest that was altered by itself fails alone; if all differ, it is the program, and they wait."""
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    slip = editions.slip
    with full.writing() as c:
        readers = c.scalars(select(slip.c.subscriber).order_by(slip.c.subscriber)).all()[:altered]
        c.execute(update(slip).where(slip.c.subscriber.in_(readers)).values(canonical_hash="of other words"))
    with pipeline.mail_server(tmp_path / "mail") as server:
        ours = settings.model_copy(update={"mail": MailSettings(port=server.port, starttls="never")})
        if altered == READERS:
            with pytest.raises(WrongState, match="what a digest says has changed; nothing was sent"):
                pipeline.send(full, ours, ID, clock=clock)
        else:
            counts = pipeline.send(full, ours, ID, clock=clock)
            assert (counts["sent"], counts["failed"]) == (READERS - 1, 1)
    with full.reading() as c:
        assert outbox.counts(c, ID)["queued"] == (READERS if altered == READERS else 0)
