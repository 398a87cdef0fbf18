"""Breaches of what readers were promised, planted in real digests and notes: each is stopped, its words marked."""

from collections.abc import Mapping
from dataclasses import replace

import pytest

from rules.slip import Sentence, SlipView
from service.editions.gate import check, refuse, texts_of
from service.editions.render import page, render
from service.editions.wording import view
from service.errors import UnsafeText
from tests.service.editions.cast import BOOK, HEAD, edition, hatch, look, threshold

# Whom a digest of the reader of paddock p0 may not name: the neighbours, their farms and paddocks.
NAMES = frozenset({"Holding h3", "Kelp 3", "Kelp 4", "Quandong", "Bob Gallagher", "Home", "12"})
OWN = ("Kelp 0",)

BREACHES = [
    ("a rate", "Two of us put out 10 mL/ha last week.", "10 mL/ha"),
    ("a rate in words", "Half a litre per hectare does it.", "litre per hectare"),
    ("a product", "Chlorpyrifos worked for me.", "Chlorpyrifos"),
    ("a product by its trade name", "Talstar worked for me.", "Talstar"),
    ("an instruction", "Time to spray the edges.", "spray"),
    ("weather for it", "Delta T is good tonight.", "Delta T"),
    ("no risk", "There is no risk south of the road.", "no risk"),
    ("an all-clear", "The south is all clear.", "all clear"),
    ("safe", "Your crop is safe.", "safe"),
    ("a hatch as fact", "The mites have hatched.", "hatched"),
    ("a staff word", "See the signal for it.", "signal"),
    ("a stage by its code", "Look at BBCH 11.", "BBCH"),
    ("a neighbour's paddock", "They are thick in Kelp 3.", "Kelp 3"),
    ("a neighbour's paddock of one word", "They are thick in Quandong.", "Quandong"),
    ("a neighbour's paddock of a common word", "Look over the fence of the Home paddock.", "Home"),
    ("a neighbour's farm", "They are thick at Holding h3.", "Holding h3"),
    ("a neighbour", "Gallagher's crop has them.", "Gallagher"),
    ("a telephone number", "Ring Ivy on 0400 123 456.", "0400 123 456"),
]


def a_digest(note: str = "Thanks to all who looked.") -> SlipView:
    """The real digest of a reader with a count, a hatch and what others found."""
    rows = [look(i, present=i % 2 == 0) for i in range(8)]
    composed = edition(rows, [hatch(), threshold(0)])
    return view(composed.slips["s1"], composed.statements, replace(HEAD, note=note), BOOK)


def a_quiet_digest() -> SlipView:
    composed = edition()
    return view(composed.slips["s1"], composed.statements, HEAD, BOOK)


def mailed(view: SlipView) -> Mapping[str, str]:
    return texts_of(render(view)) | {"page.html": page(view)}


def test_real_digests_pass() -> None:
    """The promises hold of what is really said, in mail and page."""
    for digest in (a_digest(), a_quiet_digest()):
        assert digest.cards or digest.silence
        refuse(mailed(digest), NAMES, OWN)


def test_the_readers_own_paddock_is_named_and_to_nobody_else() -> None:
    shown = mailed(a_digest())
    assert "Kelp 0" in shown["text"]
    marks = check(shown, {*NAMES, *OWN})
    assert {(where, word) for where, word, _ in marks} == {(where, "Kelp 0") for where in ("text", "html", "page.html")}


@pytest.mark.parametrize(("breach", "marked"), [case[1:] for case in BREACHES], ids=[case[0] for case in BREACHES])
def test_a_breach_in_the_coordinators_note_is_stopped(breach: str, marked: str) -> None:
    with pytest.raises(UnsafeText) as alone:
        refuse({"note": breach}, NAMES, OWN)
    assert [word for _, word, _ in alone.value.marks] == [marked]
    with pytest.raises(UnsafeText) as sent:
        refuse(mailed(a_digest(breach)), NAMES, OWN)
    assert {(where, word) for where, word, _ in sent.value.marks} == {
        (where, marked) for where in ("text", "html", "page.html")
    }
    assert f"“{marked}”" in str(sent.value)


PLACES = ("answer", "around", "keep_in_mind", "silence", "foot", "card")


@pytest.mark.parametrize("place", PLACES)
@pytest.mark.parametrize(("breach", "marked"), [BREACHES[0][1:], BREACHES[7][1:], BREACHES[12][1:]])
def test_a_breach_anywhere_in_a_digest_is_stopped(place: str, breach: str, marked: str) -> None:
    planted, digest = Sentence(breach, "fixed:planted"), a_digest()
    if place == "card":
        digest = replace(digest, cards=(replace(digest.cards[0], what=(planted,)), *digest.cards[1:]))
    else:
        digest = replace(digest, **{place: planted if place == "answer" else (planted,)})
    with pytest.raises(UnsafeText) as caught:
        refuse(texts_of(render(digest)), NAMES, OWN)
    assert {(where, word) for where, word, _ in caught.value.marks} == {("text", marked), ("html", marked)}


def test_a_breach_in_the_subject_is_stopped() -> None:
    digest = replace(a_digest(), subject=Sentence("This week: no risk", "fixed:planted"))
    with pytest.raises(UnsafeText) as caught:
        refuse(texts_of(render(digest)), NAMES, OWN)
    assert ("subject", "no risk") in {(where, word) for where, word, _ in caught.value.marks}


@pytest.mark.parametrize(
    "disguise", ["n\u200bo risk", "no\u00a0risk", "no\nrisk", "NO  RISK", "n\u00ado ri\u00adsk", "ｎｏ ｒｉｓｋ"]
)
def test_a_disguise_does_not_help(disguise: str) -> None:
    for texts in ({"note": f"There is {disguise} here."}, mailed(a_digest(f"There is {disguise} here."))):
        with pytest.raises(UnsafeText):
            refuse(texts, NAMES, OWN)


def test_many_breaches_are_marked_together() -> None:
    note = "No risk at Quandong: spray 2 L/ha of bifenthrin, ring 0400 123 456."
    with pytest.raises(UnsafeText) as caught:
        refuse({"note": note}, NAMES, OWN)
    marked = [word for _, word, _ in caught.value.marks]
    assert marked == ["No risk", "Quandong", "spray", "2 L/ha", "bifenthrin", "ring 0400 123 456"]
