"""Finds names of people, farms and paddocks in running text, without taking every "home" for a paddock.

- Names of more words count wherever they stand, in any case. If all their words are everyday ones ("Wheat
  Block"), only where written as a name. The last word of one, if it is no everyday word, also counts alone
  ("Gallagher" of "Bob Gallagher").
- A single word counts where it is written as a name; in lower case only as a possessive or beside a word
  such as "paddock".
- A single everyday word ("Home", "Top", "May") counts only as a possessive or beside such a word.
- One or two characters, or a number, count only after "paddock", "block" or "field", and not where a unit
  follows ("a paddock 5 km away").
- What has no letters or digits counts where it stands as it is.
"""

import re
from collections import defaultdict
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise

from service.editions.running_text import Word, one_line, words

_ENDINGS = ("", "'s", "s", "s'")
_BEFORE_SHORT = frozenset({"paddock", "block", "field"})
_UNIT_FOLLOWS = re.compile(
    r"\s?(?:km|m|ha|kilomet|hect|min|hours?|days?|weeks?|spots?|plants?|looks?|of|to|and|%|[.,:–-]\s?\d)"
)


@dataclass(frozen=True, slots=True)
class _Name:
    folded: tuple[str, ...]
    written: str
    kind: str  # whole, written, single, everyday, short


class Names:
    """Many names, indexed by their first word."""

    def __init__(self, names: Iterable[str], everyday: frozenset[str], beside: frozenset[str]) -> None:
        self._beside = beside
        self._by_word: dict[str, list[_Name]] = defaultdict(list)
        self._without_words: list[str] = []
        for name in sorted({one_line(name) for name in names} - {""}):
            found = words(name)
            if not found:
                self._without_words.append(name)
            for entry in _entries(name, found, everyday):
                self._index(entry)

    def spans(self, line: str) -> Iterator[tuple[int, int]]:
        """Where a name stands in one line of running text."""
        tokens = words(line)
        for at, token in enumerate(tokens):
            for name in self._by_word.get(token.folded, ()):
                if self._stands(name, line, tokens, at):
                    yield token.begin, _end(name, tokens[at + len(name.folded) - 1])
        for bare in self._without_words:
            yield from ((hit.start(), hit.end()) for hit in re.finditer(re.escape(bare), line))

    def _index(self, entry: _Name) -> None:
        endings = _ENDINGS if len(entry.folded) == 1 and entry.kind != "short" else ("",)
        for ending in endings:
            self._by_word[entry.folded[0] + ending].append(entry)

    def _stands(self, name: _Name, line: str, tokens: Sequence[Word], at: int) -> bool:
        mine = tokens[at : at + len(name.folded)]
        if not _same(name.folded, mine) or any(b.begin - a.end > 3 for a, b in pairwise(mine)):
            return False
        if name.kind == "whole":
            return True
        if name.kind == "written":
            return all(
                word.written[0].isupper()
                for word, own in zip(mine, words(name.written), strict=True)
                if own.written[0].isupper()
            )
        before, after = tokens[at - 1].folded if at else "", tokens[at + 1].folded if at + 1 < len(tokens) else ""
        if name.kind == "short":
            alone = not _UNIT_FOLLOWS.match(line, mine[0].end)
            return mine[0].written == name.written and before in _BEFORE_SHORT and alone
        as_name = mine[0].written[0].isupper()
        owned = mine[0].folded.endswith("'s") or before in self._beside or after in self._beside
        return owned if name.kind == "single" and not as_name else as_name and (owned or name.kind == "single")


def _entries(name: str, found: Sequence[Word], everyday: frozenset[str]) -> Iterator[_Name]:
    """The ways in which one name may stand in a text."""
    folded = tuple(word.folded for word in found)
    if len(folded) > 1:
        common = all(word in everyday or len(word) <= 2 for word in folded)
        yield _Name(folded, name, "written" if common else "whole")
        last = found[-1]
        if len(last.written) >= 4 and last.folded not in everyday and last.written[0].isupper():
            yield _Name((last.folded,), last.written, "single")
    elif folded and (len(name) <= 2 or name.isdigit()):
        if name != "I":
            yield _Name(folded, name, "short")
    elif folded:
        yield _Name(folded, name, "everyday" if folded[0] in everyday else "single")


def _same(name: Sequence[str], mine: Sequence[Word]) -> bool:
    if len(name) != len(mine) or any(a != b.folded for a, b in zip(name[:-1], mine[:-1], strict=True)):
        return False
    return mine[-1].folded in [name[-1] + ending for ending in _ENDINGS]


def _end(name: _Name, last: Word) -> int:
    """Where the name ends, without a possessive or plural ending."""
    return last.begin + min(len(name.folded[-1]), last.end - last.begin)


class Phrases:
    """Phrases that count wherever they stand as whole words, in any case."""

    def __init__(self, phrases: Iterable[str]) -> None:
        self._phrases = sorted({one_line(phrase).lower() for phrase in phrases} - {""})

    def cover(self, line: str, begin: int, end: int) -> bool:
        """Whether one of them holds all of that span of the line."""
        low = line.lower() if len(line.lower()) == len(line) else line
        return any(_covers(phrase, low, begin, end) for phrase in self._phrases)


def _covers(phrase: str, line: str, begin: int, end: int) -> bool:
    at = line.find(phrase, max(0, end - len(phrase)))
    while 0 <= at <= begin:
        last = at + len(phrase)
        parted = not (line[at - 1 : at].isalnum() and phrase[0].isalnum())
        if parted and not (line[last : last + 1].isalnum() and phrase[-1].isalnum()):
            return True
        at = line.find(phrase, at + 1)
    return False
