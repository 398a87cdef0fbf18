"""A count sent as one number: its owner is asked to count by spots, and nobody else hears of it."""

from typing import Any

import pytest

from rules.records import Ask, Signal
from service.editions import gate
from service.editions.offers import told_crops
from service.editions.wording import sentences
from tests.service.editions import cast
from tests.service.editions.goldens import SOWN
from tests.service.editions.plain import card_words, printed

BARE: dict[str, Any] = {"low": None, "high": None, "spots": None, "more_spots": None}
ASKED = "One number can't be set against the number that matters: count again by spots."


def one_number(i: int = 0, **changes: Any) -> Signal:
    return cast.threshold(i, "count_by_spots", figures=BARE, **changes)


def test_its_owner_is_asked_to_count_by_spots() -> None:
    shown = cast.said(cast.edition(signals=[one_number()], paddocks=cast.fields(p0=SOWN)))
    (card,) = shown.cards
    assert card.ask == Ask.COUNT
    assert [each.text for each in card.what][:2] == ["Kelp 0, Sun 10 May: 12.4 a plant.", ASKED]
    assert card.how.text == "5 spots, 10 plants each."
    assert [each.text for each in card.number] == ["10 a plant (a published study)."]
    why = next(each for each in card.details if each.heading == "Why we ask")
    assert why.sentences[0].text == "How far a count may be off shows only where spots are counted one by one."


def test_it_is_never_called() -> None:
    text = printed(cast.said(cast.edition(signals=[one_number()], paddocks=cast.fields(p0=SOWN))))
    shown, _, _ = text.partition("Why we ask")
    for word in ("At or above", "Near the number", "Below the number", "likely"):
        assert word not in shown


@pytest.mark.parametrize("dressed", [False, True])
@pytest.mark.parametrize("others", [[], [cast.hatch(), cast.threshold(0)]])
def test_the_card_is_short_and_may_be_sent(others: list[Signal], dressed: bool) -> None:
    fields = cast.fields(p0=SOWN | {"seed_dressing": dressed})
    rows = [cast.look(0, True), cast.look(1, True), cast.look(2, False)]
    shown = cast.said(cast.edition(rows, [one_number(), *others], paddocks=fields))
    assert all(card_words(card) <= 60 for card in shown.cards)
    texts = {str(n): each.text for n, each in enumerate(sentences(shown))}
    assert ASKED in texts.values()
    assert gate.check(texts, ()) == []


def test_others_hear_nothing_of_it() -> None:
    other = cast.reader(paddocks=("p1",), person="person1", holding="h1")
    rows = [cast.look(0, True, spot_counts=())]
    with_it, without = (cast.edition(rows, signals, [other]) for signals in ([one_number(rows=rows)], []))
    assert with_it.slips == without.slips
    assert {each.wording for each in with_it.statements.values()} == {"count", "looks"}


def test_it_tells_nobody_the_crop() -> None:
    """A row whose crop others may guess from a statement is hidden among those who grow it; this one needs no more."""
    rows = [cast.look(0, True)]
    known = cast.district(rows)
    assert set(told_crops([cast.threshold(0, rows=rows)], known, cast.BOOK)) == {rows[0].key}
    assert told_crops([one_number(rows=rows)], known, cast.BOOK) == {}
