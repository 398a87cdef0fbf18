"""What a reader is told, before it has a shape: sentences, each with where it came from.

An origin is `statement:<hash>` (an edition's statement), `catalogue:<pest>.<field>`, `caution:<id>`,
`fixed:<key>` (a sentence that stands in every slip), `reader:<field>` (the reader's own values),
`note` (the coordinator's), or `weather:<source>` (attribution).
"""

from dataclasses import dataclass

from rules.records import Ask


@dataclass(frozen=True, slots=True)
class Sentence:
    text: str
    origin: str


@dataclass(frozen=True, slots=True)
class Detail:
    """Something that stands one tap away from its card, under a heading."""

    heading: str
    sentences: tuple[Sentence, ...]


@dataclass(frozen=True, slots=True)
class Card:
    """One ask: what and where, when, how, the number that matters, one caution of its own."""

    pest: str
    ask: Ask
    minutes: int
    title: Sentence
    what: tuple[Sentence, ...]
    when: Sentence
    how: Sentence
    number: tuple[Sentence, ...]
    caution: Sentence | None
    details: tuple[Detail, ...]


@dataclass(frozen=True, slots=True)
class SlipView:
    """One reader's digest for one week, in reading order. Links are placeholders until it is sent."""

    subject: Sentence
    day: str  # "Tue 12 May"
    answer: Sentence  # the first line answers "what should I look at this week?"
    before_looking: tuple[Sentence, ...]
    cards: tuple[Card, ...]
    keep_in_mind: tuple[Sentence, ...]
    silence: tuple[Sentence, ...]  # where nothing is asked: what is known, and what nobody looked at
    around: tuple[Sentence, ...]  # what others found, with the effort behind it
    note: tuple[Sentence, ...]
    signed_by: str
    before_acting: Sentence
    foot: tuple[Sentence, ...]  # usual checks, how this was worked out, attribution


SHOW_LINK = "{{link:show}}"
UNSUBSCRIBE_LINK = "{{link:unsubscribe}}"


@dataclass(frozen=True, slots=True)
class Rendered:
    """A slip's canonical form: subject, text and HTML, with link placeholders."""

    subject: str
    text: str
    html: str
