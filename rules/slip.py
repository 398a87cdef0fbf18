"""What a reader is told, before it has a shape: as references that are kept, and as sentences.

An edition keeps *statements* (figures and a wording key, shared by many readers) and one *slip* a
reader (references to statements beside the reader's own values). Sentences are made from these and
the rule book alone, so that the same references always say the same.

An origin is `statement:<hash>` (an edition's statement), `catalogue:<pest>.<field>`, `caution:<id>`,
`fixed:<key>` (a sentence that stands in every slip), `reader:<field>` (the reader's own values),
`note` (the coordinator's), or `weather:<source>` (attribution).
"""

from collections.abc import Iterable
from dataclasses import dataclass, field
from datetime import date, datetime

from rules.digests import digest
from rules.records import Ask, Evidence, Figures

# --- kept ----------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Basis:
    """A signal that a statement rests on, with the version of the rule that gave it."""

    signal: str
    rule: str
    rule_hash: str


@dataclass(frozen=True, slots=True)
class Statement:
    """One thing an edition says, to however many readers. `figures` hold JSON values only.

    The hash covers what is said; the signals and rows it rests on are kept beside it.
    """

    hash: str
    kind: str
    pest: str
    ask: Ask
    wording: str
    figures: Figures
    basis: tuple[Basis, ...] = ()
    evidence: tuple[Evidence, ...] = ()


def statement_hash(kind: str, pest: str, ask: Ask, wording: str, figures: Figures) -> str:
    """The name of a statement's content."""
    return digest({"kind": kind, "pest": pest, "ask": ask, "wording": wording, "figures": figures})


@dataclass(frozen=True, slots=True)
class Line:
    """One place in a slip: the statements it rests on, strongest first, and the reader's own values."""

    statements: tuple[str, ...]
    own: Figures


@dataclass(frozen=True, slots=True)
class Slip:
    """One reader's part of an edition, as references. `own` holds what is counted around the reader."""

    subscriber: str
    asks: tuple[Line, ...]
    mind: tuple[Line, ...]
    around: tuple[Line, ...]
    own: Figures


@dataclass(frozen=True, slots=True)
class Head:
    """What every slip of an edition shares besides its statements."""

    edition: str
    district: str  # its name
    day: date  # the local date it was drafted for
    holdings_to_hide: int
    warm_half: bool  # the warm half of the year, where cautions about heat belong
    signed_by: str = ""
    note: str = ""
    attributions: tuple[str, ...] = ()  # of the weather's sources


@dataclass(frozen=True, slots=True)
class Edition:
    """One district's digest for one week: draft, held, signed or sent."""

    id: str  # "north-2026-W20"
    district: str
    week: str  # "2026-W20"
    as_of: datetime
    drafted_at: datetime
    drafted_by: str
    head: Head
    state: str = "draft"
    note: str = ""
    hold_reason: str | None = None
    held_by: str | None = None
    held_at: datetime | None = None
    signed_at: datetime | None = None
    signed_by: str | None = None
    sent_at: datetime | None = None
    sent_by: str | None = None
    hashes: Figures = field(default_factory=dict)  # of rules, catalogue, templates and renderer


@dataclass(frozen=True, slots=True)
class Hold:
    """Why one statement of an edition is kept from readers, by whom and since when."""

    reason: str
    by: str
    at: datetime


# --- said ----------------------------------------------------------------------------------------


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


class Joined(str):
    """A text that still knows the parts it was joined from, since other readers' texts share most of them."""

    __slots__ = ("parts",)
    parts: tuple[str, ...]

    def __new__(cls, parts: Iterable[str]) -> "Joined":
        kept = tuple(parts)
        made = super().__new__(cls, "".join(kept))
        made.parts = kept
        return made

    def __reduce__(self) -> tuple[type["Joined"], tuple[tuple[str, ...]]]:
        """As its parts, for copies and for other processes."""
        return Joined, (self.parts,)


@dataclass(frozen=True, slots=True)
class Rendered:
    """A slip's canonical form: subject, text and HTML, with link placeholders; the bodies may be `Joined`."""

    subject: str
    text: str
    html: str
