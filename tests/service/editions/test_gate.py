"""The gate: what it marks, what it lets by, and whose names it knows."""

import pytest

from service.editions.gate import NOTE_LIMIT, TEXT_LIMIT, check, refuse, texts_of
from service.editions.render import render
from service.errors import UnsafeText
from tests.service.editions.views import a_view, said

NAMES = [
    "Bob Gallagher",
    "Quandong",
    "Kelp Reach Pastoral",
    "Home",
    "Top",
    "12",
    "A",
    "I",
    "Jo",
    "Wheat Block",
    "Holding h3",
    "🌾🌾",
]


def words(
    text: str, names: list[str] | None = None, allowed: list[str] | None = None, where: str = "note"
) -> list[str]:
    return [word for _, word, _ in check({where: text}, NAMES if names is None else names, allowed or [])]


@pytest.mark.parametrize(
    ("text", "marked"),
    [
        # all-clears
        ("There is no risk.", "no risk"),
        ("NO-RISK area", "NO-RISK"),
        ("no\n  risk", "no risk"),
        ("It is all clear.", "all clear"),
        ("Looks clear to me", "clear"),
        ("mites: none", "none"),
        ("You are safe", "safe"),
        ("low risk this week", "low risk"),
        ("There is nothing there.", "nothing there"),
        ("pest-free", "pest-free"),
        # what weather can't tell
        ("Mites have hatched", "hatched"),
        ("they are hatching", "are hatching"),
        # to act
        ("Spray now", "Spray"),
        ("he was spraying", "spraying"),
        ("boomspray out", "boomspray"),
        ("ｓｐｒａｙ", "spray"),
        ("spr\u00aday s\u200bprays", "spray"),
        ("Treat early", "Treat"),
        ("under treatment", "treatment"),
        ("we controlled it", "controlled"),
        ("apply it", "apply"),
        ("take action", "take action"),
        # weather for it
        ("Delta T is right", "Delta T"),
        ("no inversion tonight", "inversion"),
        # rates
        ("10 mL/ha", "10 mL/ha"),
        ("2 L per hectare", "2 L per hectare"),
        ("400 g a hectare", "400 g a hectare"),
        ("two litres to the hectare", "litres to the hectare"),
        ("g/ha", "g/ha"),
        ("1.5kg / 100 L", "1.5kg / 100 L"),
        ("about 300 mls", "300 mls"),
        ("0.5 % v/v", "0.5 % v/v"),
        ("the label rate", "label rate"),
        # products and actives
        ("Chlorpyrifos is cheap", "Chlorpyrifos"),
        ("lambda-cyhalothrin", "cyhalothrin"),
        ("momfluorothrin", "momfluorothrin"),  # by its ending
        ("an insecticide", "insecticide"),
        ("BIFENTHRIN", "BIFENTHRIN"),
        # telephone numbers
        ("0412 345 678", "0412 345 678"),
        ("(08) 8123 4567", "(08) 8123 4567"),
        ("+61 8 8123-4567", "+61 8 8123-4567"),
        ("0412345678", "0412345678"),
        ("13 12 34", "13 12 34"),
        ("call me on 555 123", "call me on 555 123"),
        # staff words
        ("this edition", "edition"),
        ("your slip", "slip"),
        ("the signal's cell", "signal's"),
        ("at BBCH 11", "BBCH"),
        ("a station-day", "station-day"),
        ("in the outbox", "outbox"),
        # links, addresses, positions, markup
        ("see www.example.org", "www.example.org"),
        ("https://example.org/x", "https://example.org/x"),
        ("write to ned@example.org", "ned@example.org"),
        ("ned.example.com has it", "ned.example.com"),
        ("34 Marsh Road", "34 Marsh Road"),
        ("-34.1234, 138.5678", "-34.1234, 138.5678"),
        ("<b>mites</b>", "<b>"),
        ("<script>x</script>", "<script>"),
        ("[mites](x)", "](x"),
        ("{{ link }}", "{{"),
    ],
)
def test_what_may_not_be_sent_is_marked_as_it_stands(text: str, marked: str) -> None:
    assert marked in words(text)


@pytest.mark.parametrize(
    "text",
    [
        "Signed by the coordinator. Nuclear, clearly, cleared, unclear, safely, safety, slippery, signalled, cellar.",
        "A treaty, a retreat, entreaties, a tree. Nothing. There was rain.",
        "Found in 4 of 11 looks, 5–10 km north-west.",
        "Nothing reported near you. Nobody looked within 20 km. This tells you nothing about pests.",
        "Nothing to do yet. Your usual crop checks still stand.",
        "10 a plant at one true leaf; 20 % of plants; 12.4 a plant (10.2 to 14.6).",
        "Rain of 12 mm on 24 April 2026; cool since 2026-04-25; 11:30–2:30; seasons 2024 2025.",
        "Seen in 2 looks on 1,000 ha; 5 spots, 20 plants each; 6 a hundred square centimetres.",
        "This is a reason to talk to your adviser, not a decision.",
        "Mites of group 3A, in postcodes 9001 and 9002.",
        "The weather this hatch needs has likely come, some time between 21 April and 19 May.",
        "I took 2 L in a hat and 30 g of seed.",
        "Before you act: be sure what it is, ask a licensed adviser, follow the label and local law, keep to "
        "withholding, re-entry and grazing periods, rotate groups, and measure the weather in the paddock.",
        "Odds: about once in 12 seasons. a < b and c > d; bread & butter.",
    ],
)
def test_what_may_be_sent_is_let_by(text: str) -> None:
    assert words(text, names=[]) == []


# --- names -------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "marked"),
    [
        ("Bob Gallagher saw them", ["Bob Gallagher"]),
        ("at bob gallagher's", ["bob gallagher"]),
        ("at Gallagher's", ["Gallagher"]),
        ("next to the Gallaghers", ["Gallagher"]),
        ("in QUANDONG", ["QUANDONG"]),
        ("in the quandong paddock", ["quandong"]),
        ("Kelp-Reach Pastoral", ["Kelp-Reach Pastoral"]),
        ("in the Home paddock", ["Home"]),
        ("in Top's corner", ["Top"]),
        ("in paddock 12, edges", ["12"]),
        ("in paddock A", ["A"]),
        ("in the Wheat Block", ["Wheat Block"]),
        ("on Holding h3", ["Holding h3"]),
        ("in 🌾🌾 today", ["🌾🌾"]),
    ],
)
def test_names_are_marked_where_they_are_names(text: str, marked: list[str]) -> None:
    assert words(text) == marked


@pytest.mark.parametrize(
    "text",
    [
        "Stay at home; the top of the hill; Top marks to all. Home again.",
        "A paddock 12 km away, a paddock I walked, 12 looks, paddock 12 of 30.",
        "A look in a paddock. I say so. Jo-ey was there.",
        "We are holding h3 back. A wheat block of ours; quandongs are a fruit.",
        "Kelp on the reach; a reachable pastoral lease.",
        "Gallagherson is another.",
    ],
)
def test_the_same_words_are_let_by_where_they_are_none(text: str) -> None:
    assert words(text) == []


def test_the_readers_own_names_and_public_places_may_stand() -> None:
    text = "Mites in Quandong, near Kelp Reach."
    names = ["Quandong", "Kelp Reach", "Quandong South"]
    assert words(text, names) == ["Quandong", "Kelp Reach"]
    assert words(text, names, ["Quandong"]) == ["Kelp Reach"]
    assert words(text, names, ["Quandong", "Kelp Reach"]) == []
    assert words("in Quandong South", names, ["Quandong"]) == ["Quandong South"]  # a longer name is not one's own
    assert words("at Quandong's gate", names, ["Quandong"]) == []


def test_an_own_name_may_be_an_unsafe_word_but_opens_no_phrase() -> None:
    assert words("Mites in Clear Hills.", [], ["Clear Hills"]) == []
    assert words("Clear Hills is clear", [], ["Clear Hills"]) == ["clear"]
    assert words("there is no risk", [], ["no"]) == ["no risk"]


def test_a_title_of_the_catalogue_may_stand_whole_and_only_whole() -> None:
    title = "Challenges in devising economic spray thresholds"
    assert words(f"Source: {title}, 2015.", [], [title]) == []
    assert words("Source: spray thresholds, 2015.", [], [title]) == ["spray"]


def test_one_of_thousands_of_names_is_found() -> None:
    many = frozenset(f"Farm{i} Quandong{i}" for i in range(5000))
    assert [word for _, word, _ in check({"note": "at Quandong4321's"}, many)] == ["Quandong4321"]


# --- whole digests -----------------------------------------------------------------------------


def test_every_part_of_a_rendered_digest_is_read_without_its_tags() -> None:
    texts = texts_of(render(a_view(subject=said("A clear week"), around=(said("No <risk>: no risk & none."),))))
    marks = check(texts, [])
    assert {(where, word) for where, word, _ in marks} == {
        ("subject", "clear"),
        ("html", "clear"),  # its title
        *((where, word) for where in ("text", "html") for word in ("no risk", "none")),
    }


def test_words_of_two_paragraphs_are_no_phrase_and_words_across_tags_are() -> None:
    assert words("<p>No</p><p>risk of rain</p>", where="html") == []
    assert words("<p>no <b>risk</b></p>", where="html") == ["no risk"]
    assert words("<style>.clear{}</style><!-- none --><p class='safe'>x</p>", where="html") == []
    assert words("no&nbsp;risk &#110;one", where="html") == ["no risk", "none"]


def test_each_mark_is_named_once_a_place_with_its_reason() -> None:
    marks = check({"note": "none, none", "text": "none"}, [])
    assert [(where, word) for where, word, _ in marks] == [("note", "none"), ("text", "none")]
    assert all("all-clear" in reason for _, _, reason in marks)


def test_refuse_names_every_word_and_carries_the_marks() -> None:
    with pytest.raises(UnsafeText, match="reword them") as caught:
        refuse({"note": "Spray 10 mL/ha of bifenthrin"}, [])
    assert [word for _, word, _ in caught.value.marks] == ["Spray", "10 mL/ha", "bifenthrin"]
    assert all(f"“{word}”" in str(caught.value) for _, word, _ in caught.value.marks)


def test_refuse_lets_a_plain_text_by() -> None:
    refuse(texts_of(render(a_view())) | {"note": "Thanks to all who looked."}, NAMES)


@pytest.mark.parametrize(("where", "limit"), [("note", NOTE_LIMIT), ("text", TEXT_LIMIT), ("html", TEXT_LIMIT)])
def test_a_text_that_is_too_long_is_refused_with_both_numbers(where: str, limit: int) -> None:
    assert words("x" * limit, where=where) == []
    ((_, _, reason),) = check({where: "x" * (limit + 1)}, [])
    assert f"{limit + 1:,} characters" in reason
    assert f"{limit:,}" in reason
