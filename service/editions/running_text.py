"""Text as a reader reads it: paragraphs without tags, line ends or invisible characters, and their words."""

import re
import unicodedata
from collections.abc import Iterator
from functools import lru_cache
from html import unescape
from typing import NamedTuple

_WORD = re.compile(r"[^\W_]+(?:['’][^\W_]+)*")
_INVISIBLE = re.compile(
    "[\u00ad\u034f\u061c\u180e\u200b-\u200f\u2060-\u2064\u202a-\u202e\u2066-\u2069\ufe00-\ufe0f\ufeff]"
)
_HIDDEN = re.compile(r"<(style|script)\b.*?</\1\s*>|<!--.*?-->", re.DOTALL | re.IGNORECASE)
_BLOCK = re.compile(r"</?(?:p|tr|li|ul|h\d|div|table|section|article|details|summary|title|br|dt|dl)\b[^>]*>", re.I)
_TAG = re.compile(r"<[^>]*>")


class Word(NamedTuple):
    """One word of a paragraph: where it stands, as written, and in the form that is compared."""

    begin: int
    end: int
    written: str
    folded: str


def one_line(text: str) -> str:
    """The text in its plain form: compatibility characters, invisible ones and runs of space made plain."""
    return " ".join(_INVISIBLE.sub("", unicodedata.normalize("NFKC", text)).split())


def without_tags(html: str) -> str:
    """What HTML shows as text; blocks become paragraphs."""
    return unescape(_TAG.sub(" ", _BLOCK.sub("\n\n", _HIDDEN.sub(" ", html))))


def paragraphs(text: str) -> Iterator[str]:
    """Each paragraph (an empty line ends one) on one line."""
    for part in re.split(r"\n\s*\n", text):
        line = one_line(part)
        if line:
            yield line


@lru_cache(maxsize=20_000)
def words(line: str) -> tuple[Word, ...]:
    """The words of one line, in order; digests share most of their lines."""
    return tuple(
        Word(hit.start(), hit.end(), hit[0], hit[0].casefold().replace("’", "'")) for hit in _WORD.finditer(line)
    )
