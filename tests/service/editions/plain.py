"""A digest's sentences printed plainly, as they are read; the shape of mail and page is tested elsewhere.

The golden digests in tests/golden_slips are written anew by: python -m tests.service.editions.goldens
"""

import re

from rules.slip import Card, SlipView


def printed(view: SlipView) -> str:
    """All of a digest, the details behind its cards too."""
    parts = [f"Subject: {view.subject.text}", f"{view.day}\n{view.answer.text}"]
    parts += [_block("Before you look", view.before_looking), *map(_card, view.cards)]
    named = {
        "Keep in mind": view.keep_in_mind,
        "What is known near you": view.silence,
        "What others found": view.around,
        f"A note from {view.signed_by}": view.note,
        "Before you act": (view.before_acting,),
        "Foot": view.foot,
    }
    parts += [_block(heading, sentences) for heading, sentences in named.items()]
    return "\n\n".join(filter(None, parts)) + "\n"


def _block(heading: str, sentences: tuple) -> str:
    return "\n".join([heading.upper(), *(each.text for each in sentences)]) if sentences else ""


def _card(card: Card) -> str:
    number = f"Number: {' '.join(each.text for each in card.number)}" if card.number else None
    lines = [
        f"{card.ask.value.upper()} · {card.minutes} min",
        card.title.text,
        " ".join(each.text for each in card.what),
        f"When: {card.when.text}",
        f"How: {card.how.text}",
        number,
        card.caution and card.caution.text,
        *(f"  {detail.heading}: {' '.join(each.text for each in detail.sentences)}" for detail in card.details),
    ]
    return "\n".join(filter(None, lines))


def card_words(card: Card) -> int:
    """The words that stand on a card with its labels, without what is one tap away."""
    shown = "\n".join(line for line in _card(card).splitlines() if not line.startswith("  "))
    return words(shown)


def words(text: str) -> int:
    return sum(bool(re.search(r"\w", token)) for token in text.split())


def words_before_others(view: SlipView) -> int:
    """The words of a digest before *what others found*."""
    lines = [each.text for part in (view.before_looking, view.keep_in_mind, view.silence) for each in part]
    return words(" ".join([view.subject.text, view.answer.text, *lines])) + sum(map(card_words, view.cards))
