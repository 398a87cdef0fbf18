"""Editions on both stores: what is kept, what each state allows, and what a signature freezes."""

from dataclasses import replace
from datetime import timedelta

import pytest
from sqlalchemy import select, update

from rules.slip import Edition, Line, Slip
from service.errors import NotFound, WrongState
from service.store import editions, network
from service.store.base import Store
from tests.builders import FOUNDED, NOW, a_district, a_holding, a_subscriber
from tests.service.editions import cast

WEEK = Edition("north-2026-W20", "north", "2026-W20", NOW, NOW, "ivy", cast.HEAD, hashes={"catalogue": "c1"})
ROWS = [cast.look(0, True, stage=11), cast.look(1, False)]
READERS = [cast.reader(f"s{i}") for i in range(7)]
COMPOSED = cast.edition(ROWS, [cast.hatch(), cast.threshold(0, rows=ROWS[:1])], READERS)
LATER = NOW + timedelta(hours=1)


@pytest.fixture
def drafted(store: Store) -> Store:
    """A store with a drafted edition for seven readers."""
    with store.writing() as c:
        network.save_district(c, a_district(), FOUNDED)
        network.save_holdings(c, [a_holding("h0")], FOUNDED)
        network.save_subscribers(c, [a_subscriber(id) for id in COMPOSED.slips])
        editions.save_draft(c, WEEK, COMPOSED.statements.values(), COMPOSED.slips.values(), READERS)
    return store


def first_hash() -> str:
    return next(iter(COMPOSED.statements))


def sign(store: Store) -> None:
    with store.writing() as c:
        editions.set_canonical(c, WEEK.id, {id: f"hash of {id}" for id in COMPOSED.slips})
        editions.mark_signed(c, WEEK.id, by="ivy", at=LATER)


def test_an_edition_comes_back_as_it_went_in(drafted: Store) -> None:
    with drafted.reading() as c:
        assert editions.get(c, WEEK.id) == WEEK
        assert editions.of_district(c, "north") == [WEEK]
        assert editions.statements(c, WEEK.id) == COMPOSED.statements
        pieces = list(editions.slips(c, WEEK.id, size=3))
    assert [len(piece) for piece in pieces] == [3, 3, 1]
    assert {kept.slip.subscriber: kept.slip for piece in pieces for kept in piece} == COMPOSED.slips


def test_an_unknown_edition_says_which_there_are(drafted: Store) -> None:
    with drafted.reading() as c, pytest.raises(NotFound, match="there is: north-2026-W20"):
        editions.get(c, "north-2026-W21")


def test_a_new_draft_replaces_an_unsigned_one(drafted: Store) -> None:
    again = cast.edition(ROWS, [cast.hatch()], [cast.reader("s1")])
    with drafted.writing() as c:
        editions.save_draft(c, replace(WEEK, as_of=LATER), again.statements.values(), again.slips.values(), READERS)
    with drafted.reading() as c:
        assert editions.get(c, WEEK.id).as_of == LATER
        assert editions.statements(c, WEEK.id) == again.statements
        assert [kept.slip for piece in editions.slips(c, WEEK.id) for kept in piece] == [again.slips["s1"]]


def test_a_hold_outlasts_a_new_draft_while_the_figures_stay(drafted: Store) -> None:
    held = [name for name, each in COMPOSED.statements.items() if each.wording in ("hatch", "looks")]
    with drafted.writing() as c:
        for name in held:
            editions.hold_statement(c, WEEK.id, name, reason="under check", by="ivy", at=NOW)
    more = cast.edition([*ROWS, cast.look(2, True)], [cast.hatch()], [cast.reader("s1")])
    with drafted.writing() as c:
        lapsed = editions.save_draft(c, WEEK, more.statements.values(), more.slips.values(), READERS)
        kept = editions.held(c, WEEK.id)
    (hatch,) = [name for name in held if COMPOSED.statements[name].wording == "hatch"]
    assert list(kept) == [hatch]
    assert kept[hatch].reason == "under check"
    assert lapsed == [name for name in held if name != hatch]


def test_a_statement_is_held_and_released(drafted: Store) -> None:
    with drafted.writing() as c:
        editions.hold_statement(c, WEEK.id, first_hash(), reason="doubtful", by="ivy", at=LATER)
        assert editions.held(c, WEEK.id)[first_hash()].by == "ivy"
        editions.release(c, WEEK.id, first_hash())
        assert editions.held(c, WEEK.id) == {}
        with pytest.raises(NotFound, match="holds no statement"):
            editions.release(c, WEEK.id, first_hash())
        with pytest.raises(NotFound, match="has no statement 'x'"):
            editions.hold_statement(c, WEEK.id, "x", reason="r", by="ivy", at=LATER)


def test_a_held_edition_is_not_signed(drafted: Store) -> None:
    with drafted.writing() as c:
        editions.hold_edition(c, WEEK.id, reason="wait for the lab", by="ivy", at=LATER)
    with pytest.raises(WrongState, match="is held \\(wait for the lab\\)"):
        sign(drafted)
    with drafted.writing() as c:
        editions.release(c, WEEK.id)
    sign(drafted)
    with drafted.reading() as c:
        assert editions.get(c, WEEK.id).state == "signed"


def test_a_new_draft_of_a_held_edition_stays_held(drafted: Store) -> None:
    with drafted.writing() as c:
        editions.hold_edition(c, WEEK.id, reason="wait", by="ivy", at=LATER)
        editions.save_draft(c, WEEK, COMPOSED.statements.values(), COMPOSED.slips.values(), READERS)
        assert editions.get(c, WEEK.id).hold_reason == "wait"


def test_signing_needs_every_digest_rendered(drafted: Store) -> None:
    with drafted.writing() as c:
        editions.set_canonical(c, WEEK.id, {"s1": "h"})
    with drafted.writing() as c, pytest.raises(WrongState, match="6 digests that were not rendered"):
        editions.mark_signed(c, WEEK.id, by="ivy", at=LATER)


def test_signing_freezes(drafted: Store) -> None:
    sign(drafted)
    with drafted.writing() as c:
        found = editions.get(c, WEEK.id)
        assert (found.signed_by, found.signed_at) == ("ivy", LATER)
        assert found.hashes == {"catalogue": "c1"}
        assert editions.get_slip(c, WEEK.id, "s1").canonical_hash == "hash of s1"
        steps = [
            lambda: editions.save_draft(c, WEEK, [], [], []),
            lambda: editions.hold_edition(c, WEEK.id, reason="r", by="ivy", at=LATER),
            lambda: editions.hold_statement(c, WEEK.id, first_hash(), reason="r", by="ivy", at=LATER),
            lambda: editions.set_canonical(c, WEEK.id, {"s1": "other"}),
            lambda: editions.mark_signed(c, WEEK.id, by="ivy", at=LATER),
            lambda: editions.release(c, WEEK.id),
        ]
        for step in steps:
            with pytest.raises(WrongState, match="is signed"):
                step()


def test_only_a_signed_edition_is_sent(drafted: Store) -> None:
    with drafted.writing() as c, pytest.raises(WrongState, match="is draft"):
        editions.mark_sent(c, WEEK.id, by="ivy", at=LATER)
    sign(drafted)
    with drafted.writing() as c:
        editions.mark_sent(c, WEEK.id, by="ivy", at=LATER)
        assert editions.get(c, WEEK.id).state == "sent"


def test_two_editions_share_a_statement_and_keep_their_own_rows(drafted: Store) -> None:
    next_week = replace(WEEK, id="north-2026-W21", week="2026-W21")
    (hatch,) = [each for each in COMPOSED.statements.values() if each.wording == "hatch"]
    with drafted.writing() as c:
        editions.save_draft(c, next_week, [replace(hatch, evidence=())], [], [])
        assert editions.statements(c, next_week.id)[hatch.hash].evidence == ()
        assert editions.statements(c, WEEK.id)[hatch.hash] == hatch
        assert len(c.execute(select(editions.statement)).all()) == len(COMPOSED.statements)


def test_a_recipient_is_kept_as_they_were_without_name_and_address(drafted: Store) -> None:
    with drafted.writing() as c:
        network.save_subscribers(c, [cast.reader("s1", paddocks=("p5",), crops=("wheat",), person=None)])
        kept = editions.reader_of(c, WEEK.id, "s1")
    assert kept == replace(READERS[1], email="", name="", consent=None)


def test_deleting_a_reader_deletes_their_digests_alone(drafted: Store) -> None:
    with drafted.writing() as c:
        assert editions.delete_reader(c, "s1") == 1
        assert editions.get_slip(c, WEEK.id, "s1") is None
        assert editions.get_slip(c, WEEK.id, "s2") is not None


def test_no_slip_is_larger_than_two_kilobytes(drafted: Store) -> None:
    fat = Slip("s1", (), (), tuple(Line(("f" * 32,), {"found": [0, 0]}) for _ in range(40)), {})
    with pytest.raises(Exception, match="ck_slip_bytes"), drafted.writing() as c:
        editions.save_draft(c, WEEK, [], [fat], READERS)
    with drafted.reading() as c:
        assert editions.get_slip(c, WEEK.id, "s1").slip == COMPOSED.slips["s1"]  # nothing half-written


def test_a_state_changed_meanwhile_is_noticed(drafted: Store) -> None:
    with drafted.writing() as c:
        c.execute(update(editions.edition).values(state="signed"))
        with pytest.raises(WrongState, match="changed by someone else"):
            editions._flip(c, WEEK.id, "draft", {"state": "signed"})
