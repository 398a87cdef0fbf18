"""What readers are told: the digests that are kept whole, and the promises that hold for every digest."""

import itertools
import re
from collections.abc import Iterator
from dataclasses import replace
from datetime import date
from typing import Any

import pytest

from rules.book import Sourced
from rules.records import Ask
from rules.slip import Line, SlipView
from service.editions.cards import card
from service.editions.wording import sentences, view, warm_half
from tests.builders import a_postcode
from tests.service.editions import cast, goldens
from tests.service.editions.cast import CUTWORM, FLEA, MITE
from tests.service.editions.plain import card_words, printed, words_before_others

NEVER = (
    r"\bnone\b|\bclear\w*|\bsafe\w*|low risk|no risk|spray|\btreat|control|slip|edition|signal|"
    r"\bcells?\b|station|BBCH|hatched|hatching now|alert|warning"
)
STAGES = (
    {"at": "reported", "code": 11},
    {"at": "up"},
    {"at": "sown"},
    {"at": "before"},
    {"at": "unknown"},
    {"at": "any"},
)


@pytest.mark.parametrize("name", goldens.ALL)
def test_digests_read_as_kept(name: str) -> None:
    kept = (goldens.FOLDER / f"{name}.txt").read_text(encoding="utf-8")
    assert printed(goldens.ALL[name]()) == kept


# --- promises, over every digest that these rules can give --------------------------------------------


def weeks() -> Iterator[SlipView]:
    """Digests over kinds of news, verdicts, how near, crops and stages."""
    rows = goldens.neighbours()
    own = cast.look(0, True, stage=11)
    keen = [cast.look(i % 8, True, ago=1 + i // 8, reporter="keen") for i in range(12)]
    found = [cast.first_seen(row, figures={"earlier_than_usual": True, "chance": 0.04}) for row in (rows[0], rows[7])]
    counts = [
        cast.threshold(0, verdict, rows=[own]) for verdict in ("below", "near", "at_or_above", "no_agreed_number")
    ]
    counts.append(cast.threshold(0, "count_by_spots", rows=[own], figures={"low": None, "high": None, "spots": None}))
    news = [[], [cast.hatch()], found, *([count] for count in counts), [cast.hatch(), *found, counts[2]]]
    crops: list[dict[str, Any]] = [
        {"crop": crop, **more}
        for crop in cast.BOOK.crops
        for more in (goldens.SOWN | {"crop": crop}, {"sown_on": date(2026, 5, 25)}, {"seed_dressing": True})
    ]
    for signals, paddock in itertools.product(news, crops):
        for seen in (rows, [*rows, own], [*rows, *keen], []):
            yield cast.said(cast.edition(seen, signals, paddocks=cast.fields(p0=paddock)))
    yield from (make() for make in goldens.ALL.values())


@pytest.fixture(scope="module")
def every() -> list[SlipView]:
    return list(weeks())


def test_words_that_may_never_stand(every: list[SlipView]) -> None:
    for shown in every:
        found = re.search(NEVER, printed(shown), re.IGNORECASE)
        assert found is None, f"{found} in {printed(shown)}"


def test_at_or_above_is_always_followed_by_what_it_is_not(every: list[SlipView]) -> None:
    seen = 0
    for shown in every:
        for found in re.finditer("at or above the number", printed(shown), re.IGNORECASE):
            rest = printed(shown)[found.end() :]
            assert rest.startswith(": this is a reason to talk to your adviser, not a decision.")
            seen += 1
    assert seen > 100


def test_cards_are_short_and_digests_too(every: list[SlipView]) -> None:
    for shown in every:
        for each in shown.cards:
            assert card_words(each) <= 60, printed(shown)
        assert words_before_others(shown) <= 300
        assert len(shown.cards) <= 3
        assert sum(each.minutes for each in shown.cards) <= 45


def test_the_usual_checks_and_the_sentence_about_acting_stand_in_every_digest(every: list[SlipView]) -> None:
    for shown in every:
        assert "Your usual crop checks still stand." in [each.text for each in shown.foot]
        assert shown.before_acting.origin == "caution:acting"


def test_the_answer_comes_first_with_its_minutes(every: list[SlipView]) -> None:
    for shown in every:
        if shown.cards:
            minutes = sum(each.minutes for each in shown.cards)
            assert f"about {minutes} minutes" in shown.subject.text
            assert f"about {minutes} minutes" in shown.answer.text
            assert shown.before_looking
        else:
            assert shown.answer.text.endswith("Your usual crop checks still stand.")
            assert shown.silence


def test_counts_are_never_without_their_effort(every: list[SlipView]) -> None:
    for shown in every:
        assert not re.search(r"\b\d+ finds\b", printed(shown))
        for found in re.finditer(r"first this season.*", printed(shown), re.IGNORECASE):
            assert re.search(r", from \d+ looks?[.;]", found[0])


def test_every_sentence_has_an_origin_that_the_trail_knows(every: list[SlipView]) -> None:
    known = {"statement", "catalogue", "caution", "fixed", "reader", "weather"}
    for shown in every:
        for each in sentences(shown):
            assert each.text.strip()
            assert each.origin.split(":")[0] in known


def test_the_language_is_plain(every: list[SlipView]) -> None:
    """Flesch and Kincaid's grade (J. P. Kincaid et al., 1975), at most 8 over each digest."""
    for shown in every:
        assert grade([each.text for each in sentences(shown)]) <= 8, printed(shown)


def grade(texts: list[str]) -> float:
    """0.39 × words a sentence + 11.8 × syllables a word − 15.59; syllables are counted as groups of vowels."""
    pieces = [piece for text in texts for piece in re.split(r"[.:;?!]\s", text + " ") if re.search("[A-Za-z]", piece)]
    words = [word for piece in pieces for word in re.findall(r"[A-Za-z']+", piece)]
    syllables = sum(max(1, len(re.findall("[aeiouy]+", re.sub("e$", "", word.lower())))) for word in words)
    return 0.39 * len(words) / len(pieces) + 11.8 * syllables / len(words) - 15.59


# --- single sentences -----------------------------------------------------------------------------


def text(*signals: Any, rows: Any = (), **paddock: Any) -> str:
    fields = cast.fields(p0=goldens.SOWN | paddock)
    return printed(cast.said(cast.edition(list(rows), list(signals), paddocks=fields)))


def test_a_hatch_is_weather_and_a_span() -> None:
    said = text(cast.hatch())
    assert "The weather this hatch needs has likely come (21 Apr–19 May)." in said
    assert "5 May" not in said  # the one day on which the rule was met is never given


def test_missing_weather_is_said() -> None:
    assert "3 days of weather are missing, which adds doubt." in text(cast.hatch(figures={"missing_days": 3}))


def test_a_count_at_the_number() -> None:
    said = text(cast.threshold(0), rows=[cast.look(0, True, stage=11)])
    assert "Kelp 0, Sun 10 May: 12.4 a plant (likely 10.2–14.6)." in said
    assert "Number: 10 a plant (a published study)." in said


def test_edge_and_middle_are_told_apart() -> None:
    count = cast.threshold(0, figures={"edge_mean": 13.5, "middle_mean": 14.33})
    assert "At the edge 13.5 a plant, in the middle 14.3." in text(count, rows=[cast.look(0, True, stage=11)])


def test_a_count_near_the_number_needs_more_samples() -> None:
    said = text(cast.threshold(0, "near"), rows=[cast.look(0, True, stage=11)])
    assert "Near the number: take more samples at 4 more spots." in said


def test_a_count_that_no_counting_settles_asks_for_no_more_of_it() -> None:
    """As where it lies inside the number's own doubt, or where too many spots would be needed."""
    said = text(cast.threshold(0, "near", figures={"more_spots": None}), rows=[cast.look(0, True, stage=11)])
    assert (
        "Near the number: more samples may not settle it; this is a reason to talk to your adviser, not a decision."
        in said
    )
    assert "take more samples" not in said


def test_a_count_without_an_agreed_number() -> None:
    said = text(cast.threshold(0, "no_agreed_number"), rows=[cast.look(0, True, stage=11)])
    assert "There is no agreed number for this crop, stage and unit." in said


def test_common_practice_is_called_so() -> None:
    said = text(cast.hatch(), rows=[cast.look(0, True, ago=9, stage=10)])
    assert "Number: 10 a plant (common practice)." in said


def test_a_number_from_memory_is_never_shown() -> None:
    """The catalogue has 50 in 10 × 10 cm for wheat from memory only."""
    fields = cast.fields(p0={"crop": "wheat"})
    said = printed(cast.said(cast.edition([], [cast.hatch()], paddocks=fields, readers=[cast.reader(crops=())])))
    assert "50" not in said
    assert "No agreed number." in said


def test_a_first_find_says_the_looking_behind_it() -> None:
    row = cast.look(1, True)
    said = text(cast.first_seen(row, finds=3, looks=41), rows=[row])
    assert "First this season, within 15 km, from 41 looks." in said
    assert "earliest" not in said  # the first of this season's three finds is their earliest by its nature
    of_five = text(cast.first_seen(row, looks=41, figures={"earliest_of": 5}), rows=[row])
    assert "First this season, within 15 km, from 41 looks; the earliest of the 5 seasons we have." in of_five
    assert "the earliest need not be early" in of_five
    early = cast.first_seen(row, figures={"earlier_than_usual": True, "chance": 0.04})
    said = text(early, rows=[row])
    assert "Earlier than usual for this much looking." in said
    assert "In fewer than 1 of 10 usual seasons" in said


def test_where_nobody_looked_it_says_so() -> None:
    assert "Nobody looked for your crops' pests within 20 km" in text()


def test_looks_for_a_pest_of_other_crops_are_no_looks_for_the_readers() -> None:
    """Somebody looked, but for cutworms, which the catalogue names no risk of in pasture."""
    pasture = cast.fields(p0={"crop": "pasture"})
    rows = [cast.look(1, True, pest=CUTWORM)]
    shown = cast.said(cast.edition(rows, readers=[cast.reader(crops=())], paddocks=pasture))
    assert "Nobody looked within" not in printed(shown)
    assert "Nobody looked for your crops' pests within 20 km" in printed(shown)


def test_the_readers_own_looks_are_called_theirs() -> None:
    rows = [cast.look(0, False, ago=9), cast.look(1, False), cast.look(2, False, pest=FLEA)]
    said = text(rows=rows)
    assert "found in 0 of 2 looks within 20 km in the last 14 days, 1 look yours." in said
    assert "in the last 14 days, 3 looks (1 look yours) were made within 20 km." in said
    assert "Lucerne fleas: not found in the one look within 20 km in the last 14 days." in said
    alone = text(cast.hatch(), rows=rows[:1])
    assert "Not found in the one look within 20 km, your own." in alone
    assert "yours" not in text(rows=rows[1:])


def test_finds_near_are_not_passed_over_where_nothing_is_asked() -> None:
    """No rule speaks, whatever the stage: the digest says so, and first that pests were found."""
    shown = cast.said(cast.edition([cast.look(1, True), cast.look(2, False)]))
    assert shown.answer.text.startswith("We ask for no special look this week, though pests of your crops were found")
    assert "Our rules ask for no special look this week; that does not rule pests out." in printed(shown)
    assert "stages we know" not in printed(shown)


def test_before_the_crop_is_up_the_ask_points_elsewhere() -> None:
    said = text(cast.hatch(), sown_on=date(2026, 5, 25))
    assert "Redlegged earth mites before your canola is up" in said
    assert "Look on weeds, along the pasture edge and the fence line." in said
    assert "Number:" not in said


def test_dressed_seed_still_needs_a_look() -> None:
    assert "Seed dressing may hide or delay feeding: look anyway." in text(cast.hatch(), seed_dressing=True)
    assert "delay feeding" not in text(cast.hatch())


def test_a_dressing_is_spoken_of_while_the_crop_is_small() -> None:
    """Cutworms matter to wheat up to stage 21; by then a dressing of the seed hides nothing."""
    row = cast.look(1, True, pest=CUTWORM)
    wheat = cast.fields(p0=goldens.SOWN | {"crop": "wheat", "seed_dressing": True})
    for stage, early in ((19, True), (20, False)):
        own = cast.look(0, True, ago=1, crop="wheat", stage=stage)
        shown = cast.said(cast.edition([row, own], [cast.first_seen(row)], paddocks=wheat))
        assert any("delay feeding" in each.text for each in shown.cards[0].what) == early


def test_a_night_look_says_to_tell_someone() -> None:
    row = cast.look(1, True, pest=CUTWORM)
    shown = cast.said(cast.edition([row], [cast.first_seen(row)]))
    assert "caution:night" in {each.origin for each in (*shown.before_looking, shown.cards[0].caution) if each}


def test_a_quieted_ask_says_from_when_to_look_again() -> None:
    assert "you looked without a find; look again from Mon 18 May." in text(
        cast.hatch(), rows=[cast.look(0, False, ago=1)]
    )


def test_effort_is_held_against_the_counts() -> None:
    keen = [cast.look(i, True, reporter="keen") for i in range(1, 6)]
    assert "Most of these reports (5 of 6 in the district) came from one person." in text(
        rows=[*keen, cast.look(6, True)]
    )


def test_more_looking_is_held_against_the_finds() -> None:
    busy = [cast.look(i, i < 4, ago=3) for i in range(8)]
    usual = [cast.look(i, i == 1, ago=14 + 7 * week) for week in range(5) for i in (1, 2)]
    assert (
        "There was more looking than usual (8 looks in a week, usually about 2), "
        "and redlegged earth mites turned up no more often: in 4 of 8 looks, and in 5 of 10 before."
        in text(rows=[*busy, *usual])
    )


def test_more_looking_is_no_reason_to_deny_a_greater_share() -> None:
    """5 of 8 against 5 of 10: the intervals overlap, but that does not make it *no more often*."""
    busy = [cast.look(i, i < 5, ago=3) for i in range(8)]
    usual = [cast.look(i, i == 1, ago=14 + 7 * week) for week in range(5) for i in (1, 2)]
    said = text(rows=[*busy, *usual])
    assert "no more often" not in said
    assert "which may explain some of the finds: redlegged earth mites turned up in 5 of 8 looks" in said


def test_a_usual_number_of_looks_is_a_whole_one() -> None:
    busy = [cast.look(i, i < 4, ago=1 + day) for i in range(8) for day in range(2)]
    usual = [cast.look(i, i == 1, ago=14 + 7 * week) for week in range(5) for i in range(1, 3 + (week == 4))]
    assert "(16 looks in a week, usually about 2)" in text(rows=[*busy, *usual])  # 11 in five weeks: 2.2


def test_many_signals_of_one_pest_make_one_card() -> None:
    row = cast.look(1, True)
    shown = cast.said(cast.edition([row], [cast.hatch(), cast.first_seen(row), cast.threshold(1)]))
    assert [each.pest for each in shown.cards] == [MITE]


def test_no_piece_is_lost_where_a_card_is_full() -> None:
    """What there is no room for stands under *details*."""
    row = cast.look(1, True)
    composed = cast.edition([row], [cast.hatch(), cast.first_seen(row)], paddocks=cast.fields(p0=goldens.SOWN))
    shown = cast.said(composed)
    details = " ".join(each.text for detail in shown.cards[0].details for each in detail.sentences)
    on_card = " ".join(each.text for each in shown.cards[0].what)
    for piece in ("First this season", "has likely come", "Start at the edges"):
        assert (piece in details) != (piece in on_card)


@pytest.mark.parametrize("stage", STAGES)
def test_must_sentences_stand_even_on_a_full_card(stage: dict[str, Any]) -> None:
    """A pest whose texts are as long as they may get: what a look needs is not moved away."""
    composed = cast.edition([], [cast.hatch()])
    (name,) = composed.statements
    line = Line(
        (name,), {"crop": "canola", "minutes": 10, "near": ["own"], "found": [1, 9, 0], "dressed": True, **stage}
    )
    long = replace(cast.BOOK.pests[MITE], when=(Sourced("On a day " * 9, "C", ""),))
    made = card(line, composed.statements, replace(cast.BOOK, pests=cast.BOOK.pests | {MITE: long}))
    said = " ".join(each.text for each in made.what)
    assert "has likely come" in said
    assert ("delay feeding" in said) == (stage["at"] not in ("before", "any"))


def test_the_note_and_its_writer_are_shown() -> None:
    composed = cast.edition()
    head = replace(cast.HEAD, note="Thanks to all who looked.", warm_half=True)
    shown = view(composed.slips["s1"], composed.statements, head, cast.BOOK)
    assert [(each.text, each.origin) for each in shown.note] == [("Thanks to all who looked.", "note")]
    assert shown.signed_by == "Ivy Marsh"


def test_heat_is_spoken_of_in_the_warm_half_of_the_year_only() -> None:
    composed = cast.edition(signals=[cast.hatch()])
    for warm in (True, False):
        shown = view(composed.slips["s1"], composed.statements, replace(cast.HEAD, warm_half=warm), cast.BOOK)
        assert any("hot vehicle" in each.text for each in shown.before_looking) == warm


def test_the_warm_half_lies_on_the_other_side_of_the_equator() -> None:
    assert warm_half(date(2026, 1, 15), -46.0)
    assert not warm_half(date(2026, 5, 12), -46.0)
    assert warm_half(date(2026, 5, 12), 46.0)


def test_far_readers_see_the_district_counts() -> None:
    rows = [cast.look(1, True, pest=FLEA), cast.look(2, False, pest=FLEA)]
    code = {"9001": a_postcode(place=cast.at(90, 0))}
    shown = cast.said(cast.edition(rows, readers=[cast.reader(paddocks=(), person=None)], postcodes=code))
    assert "Lucerne fleas: nobody looked within 20 km; found in 1 of 2 looks in the district" in printed(shown)


def test_the_strongest_ask_is_a_count() -> None:
    shown = goldens.asks()
    assert [each.ask for each in shown.cards] == [Ask.COUNT, Ask.LOOK]
