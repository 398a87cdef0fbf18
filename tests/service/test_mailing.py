"""From a signed edition to its mails: what was signed is sent, or nothing."""

from dataclasses import replace
from datetime import date, timedelta
from email import message_from_bytes, policy
from pathlib import Path

import pytest
from sqlalchemy import text, update

from service import mailing, pipeline
from service.clock import SetClock
from service.delivery.sender import Mail
from service.editions.compose import compose
from service.errors import UnsafeText, WrongState
from service.settings import Settings
from service.store import editions, network
from service.store.base import Store
from service.store.leases import Job
from service.tokens import Tokens
from tests import small_network
from tests.builders import NOW, a_district
from tests.known import known

ID = "north-2026-W20"


def test_a_digest_that_would_be_another_than_the_signed_one_is_not_mailed(store: Store, tmp_path: Path) -> None:
    small_network.fill(store)
    clock = SetClock(small_network.CUT_OFF)
    settings = Settings(data_dir=str(tmp_path), keys_file=str(tmp_path / "keys"))
    pipeline.draft(store, "north", clock=clock)
    pipeline.sign(store, settings, ID, by="ivy", clock=clock)
    mailer = mailing.Mailer(store, settings, Tokens(["k" * 32]), clock, lambda id: pipeline.book_of(store, id))
    expires = clock.now() + timedelta(hours=1)
    job = Job(1, 1, "edition", f"{ID}:s1", "north", ID, "s1", "example.org", "<m@example.org>", 0, expires)
    mail = mailer(job)
    assert isinstance(mail, Mail)
    assert message_from_bytes(mail.data, policy=policy.default)["Subject"].startswith("This week: ")
    with store.writing() as c:
        changed = c.execute(text("UPDATE slip SET canonical_hash = 'of other words' WHERE subscriber = 's1'"))
        assert changed.rowcount == 1
    with pytest.raises(WrongState, match="no longer be what was signed"):
        mailer(job)


@pytest.mark.parametrize(
    ("latitude", "month", "warm"), [(-46, 5, False), (-46, 1, True), (46, 5, True), (46, 1, False)]
)
def test_the_head_knows_the_warm_half_of_its_hemisphere(latitude: float, month: int, warm: bool) -> None:
    at = NOW.replace(month=month)
    there = known(as_of=at, district=a_district(latitude=latitude))
    assert there.today == date(2026, month, NOW.day)
    assert mailing.head(ID, there).warm_half is warm


def test_a_trail_across_versions_says_what_changed_and_compares_hashes(store: Store, tmp_path: Path) -> None:
    small_network.fill(store)
    clock = SetClock(small_network.CUT_OFF)
    settings = Settings(data_dir=str(tmp_path), keys_file=str(tmp_path / "keys"))
    pipeline.draft(store, "north", clock=clock)
    pipeline.sign(store, settings, ID, by="ivy", clock=clock)
    with store.writing() as c:
        hashes = editions.get(c, ID).hashes | {"code": "of another version"}
        c.execute(update(editions.edition).values(hashes=hashes))
    assert "equal to the byte" in pipeline.trail(store, ID, "s1")["compared"]
    with store.writing() as c:
        c.execute(text("UPDATE slip SET canonical_hash = 'of other words' WHERE subscriber = 's1'"))
    found = pipeline.trail(store, ID, "s1")
    assert found["equal"]
    assert found["compared"].startswith("code changed since")
    with store.writing() as c:
        c.execute(text("UPDATE observation SET note = 'quietly added' WHERE key = 'csv:1'"))
    assert not pipeline.trail(store, ID, "s1")["equal"]


def test_reading_all_digests_on_two_cores_is_reading_them_on_one(store: Store) -> None:
    small_network.fill(store)
    clock = SetClock(small_network.CUT_OFF)
    pipeline.draft(store, "north", clock=clock)
    with store.reading() as c:
        edition, readers = editions.get(c, ID), network.subscribers(c, "north")
    there, book, found = pipeline._said(store, "north", edition.as_of)
    many = [replace(reader, id=f"{reader.id}-{copy}") for copy in range(30) for reader in readers]
    composed = compose(there, found, book, many)
    told: list[tuple[int, int | None, str]] = []

    def read(named: frozenset[str], processes: int) -> dict[str, str]:
        return mailing.render_all(edition, composed, book, there, many, named, lambda *at: told.append(at), processes)

    one = read(frozenset(), 1)
    assert list(one) == [reader.id for reader in many]
    assert len(set(one.values())) > 1
    assert list(read(frozenset(), 2).items()) == list(one.items())
    assert [at[0] for at in told] == [*range(1, len(many) + 1)] * 2
    marked = []
    for processes in (1, 2):
        with pytest.raises(UnsafeText) as caught:
            read(frozenset({"Redlegged Earth"}), processes)
        marked.append((str(caught.value), caught.value.marks))
    assert marked[0] == marked[1]
