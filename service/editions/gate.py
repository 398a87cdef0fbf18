"""The last gate before a reader: words that may not be sent, marked where they stand.

Every rendered digest and every note passes it. Words count as whole words, so "signed" is no "sign" and
"nuclear" no "clear"; accents of typing (case, width, invisible characters, hyphens between words) don't
matter. A mark that lies wholly inside an allowed phrase is dropped: the reader's own paddock names, public
place names, and titles or sentences of the catalogue are given as `allowed`.
"""

import re
import tomllib
from collections import defaultdict
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cache, lru_cache
from itertools import pairwise
from typing import Any

from rules.slip import Rendered
from service.editions.named import Names, Phrases
from service.editions.running_text import Word, one_line, paragraphs, without_tags, words
from service.errors import UnsafeText
from service.shipped import shipped

NOTE_LIMIT = 4_000  # characters: about 600 words, twice what a whole digest may hold
TEXT_LIMIT = 2_000_000

Mark = tuple[str, str, str]  # where, the word as it stands, why it may not be sent
Found = tuple[int, int, str]  # where it begins and ends in its paragraph, why
Patterns = Sequence[tuple[re.Pattern[str], str]]


@dataclass(frozen=True, slots=True)
class _Unsafe:
    """What the list of unsafe words says, ready to look up."""

    words: Mapping[str, str]  # word → why
    shapes: Patterns
    phrases: Mapping[str, Sequence[tuple[tuple[str, ...], str]]]  # first word → its phrases
    patterns: Patterns
    note_patterns: Patterns
    name_reason: str
    everyday: frozenset[str]
    beside: frozenset[str]


def texts_of(rendered: Rendered) -> dict[str, str]:
    """The parts of a rendered digest under the names by which `check` marks them."""
    return {"subject": rendered.subject, "text": rendered.text, "html": rendered.html}


def refuse(texts: Mapping[str, str], names: Iterable[str], allowed: Iterable[str] = ()) -> None:
    """UnsafeText with every mark where any text holds what no reader may be sent."""
    marks = check(texts, names, allowed)
    if marks:
        lines = "\n  ".join(f"{where}: “{word}” {reason}" for where, word, reason in marks)
        raise UnsafeText(f"these words can't be sent; reword them and try again:\n  {lines}", marks)


def check(texts: Mapping[str, str], names: Iterable[str], allowed: Iterable[str] = ()) -> list[Mark]:
    """Every word that may not be sent, in order, each once a place.

    Parameters
    ----------
    texts
        By where they stand. A text whose place ends in "html" is read without its tags; one whose place
        is "note", or ends in " note", may hold no markup, link, address or position either.
    names
        People, farms and paddocks that no reader may see named; the same frozenset for every digest of a
        run is indexed once.
    allowed
        Names and sentences that may stand here: the reader's own names, public places, the catalogue's
        titles. They win over `names`.

    Returns
    -------
    list of (where, word, reason)
    """
    named, may = _names(frozenset(names)), _allowed(frozenset(allowed))
    marks: dict[Mark, None] = {}
    for where, text in texts.items():
        marks.update(dict.fromkeys(_marks(where, text, named, may)))
    return list(marks)


def _marks(where: str, text: str, named: Names, may: Phrases) -> Iterator[Mark]:
    note = where == "note" or where.endswith(" note")
    limit = NOTE_LIMIT if note else TEXT_LIMIT
    if len(text) > limit:
        yield where, text[:20] + "…", f"begins a text of {len(text):,} characters; it may have {limit:,}"
        return
    lines = [one_line(text)] if note else paragraphs(without_tags(text) if where.endswith("html") else text)
    for line in lines:
        found = [*_in_words(line), *((*span, _list().name_reason) for span in named.spans(line))]
        if note:
            found += _in_patterns(line, _list().note_patterns)
        for begin, end, reason in _kept(found, line, may):
            yield where, line[begin:end], reason


def _kept(found: Sequence[Found], line: str, may: Phrases) -> Iterator[Found]:
    """Marks in order, without those inside an allowed phrase or inside a longer mark of the same reason."""
    for begin, end, why in sorted(found):
        longer = (other == why and b - a > end - begin and a <= begin and end <= b for a, b, other in found)
        if not (any(longer) or may.cover(line, begin, end)):
            yield begin, end, why


@lru_cache(maxsize=20_000)
def _in_words(line: str) -> tuple[Found, ...]:
    """What the lists mark in one line, whoever reads it."""
    tokens = words(line)
    found = _in_patterns(line, _list().patterns)
    for at, token in enumerate(tokens):
        reason = _word(token.folded)
        if reason:
            found.append((token.begin, token.end, reason))
        for phrase, why in _list().phrases.get(token.folded, ()):
            mine = tokens[at : at + len(phrase)]
            if tuple(word.folded for word in mine) == phrase and _unbroken(line, mine):
                found.append((token.begin, mine[-1].end, why))
    return tuple(found)


def _unbroken(line: str, tokens: Sequence[Word]) -> bool:
    """Whether only spaces, hyphens, commas and quotes stand between words in a row; a full stop parts them."""
    gaps = [line[a.end : b.begin] for a, b in pairwise(tokens)]
    return all(not gap.strip(" -‐‑–,/_*\"“”'’") for gap in gaps)


def _in_patterns(line: str, patterns: Patterns) -> list[Found]:
    return [(*hit.span(), reason) for pattern, reason in patterns for hit in pattern.finditer(line)]


@lru_cache(maxsize=20_000)
def _word(word: str) -> str | None:
    bare = word.removesuffix("'s")
    listed = _list().words.get(bare)
    if listed:
        return listed
    return next((reason for shape, reason in _list().shapes if shape.fullmatch(bare)), None)


@lru_cache(maxsize=8)
def _names(names: frozenset[str]) -> Names:
    return Names(names, _list().everyday, _list().beside)


@lru_cache(maxsize=1024)
def _allowed(phrases: frozenset[str]) -> Phrases:
    return Phrases(phrases)


@cache
def _list() -> _Unsafe:
    """The shipped list of unsafe words, read once."""
    listed = tomllib.loads(shipped("templates", "unsafe.toml").read_text(encoding="utf-8"))
    names = listed.pop("names")
    everywhere = [group for group in listed.values() if not group.get("only_in_notes")]
    phrases: dict[str, list[tuple[tuple[str, ...], str]]] = defaultdict(list)
    for group in listed.values():
        for phrase in group.get("phrases", ()):
            phrases[phrase.split()[0]].append((tuple(phrase.split()), group["reason"]))
    return _Unsafe(
        words={word: group["reason"] for group in listed.values() for word in group.get("words", ())},
        shapes=_compiled(listed.values(), "shapes"),
        phrases=phrases,
        patterns=_compiled(everywhere, "patterns"),
        note_patterns=_compiled([group for group in listed.values() if group not in everywhere], "patterns"),
        name_reason=names["reason"],
        everyday=frozenset(names["everyday"]),
        beside=frozenset(names["beside"]),
    )


def _compiled(groups: Iterable[Mapping[str, Any]], kind: str) -> Patterns:
    return [(re.compile(text, re.IGNORECASE), group["reason"]) for group in groups for text in group.get(kind, ())]
