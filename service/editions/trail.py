"""The trail: from a sentence in a digest back to figures, rules and rows, and whether it could be said again.

Pure: what was kept, what was worked out afresh and the rows as they stand now are given; nothing is read here.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from itertools import zip_longest

from rules.book import Book
from rules.records import Evidence, Figures
from rules.slip import Basis, Head, Sentence, Slip, Statement, statement_hash
from service.editions.wording import sentences, view

Standing = Callable[[Evidence], str | None]  # the digest of a row worked out from the row as it stands; None: gone


@dataclass(frozen=True, slots=True)
class Row:
    """A row that a statement rests on, and whether it still is what it was: same, altered or gone."""

    evidence: Evidence
    found: str


@dataclass(frozen=True, slots=True)
class Source:
    """What one sentence rests on. A sentence that rests on no statement has only its origin."""

    number: int  # its place in the digest, from 1
    sentence: Sentence
    statement: str | None
    kind: str | None
    figures: Figures
    basis: tuple[Basis, ...]
    rows: tuple[Row, ...]


@dataclass(frozen=True, slots=True)
class Difference:
    """A sentence that would be said otherwise now; None where it would not be said, or was not."""

    number: int
    said: str | None
    again: str | None


@dataclass(frozen=True, slots=True)
class Trace:
    """The trail of one digest."""

    sources: tuple[Source, ...]
    differences: tuple[Difference, ...]
    altered: tuple[Row, ...]  # rows that are not what they were, each once
    misnamed: tuple[str, ...]  # statements whose kept figures no longer have their name

    @property
    def same(self) -> bool:
        """Whether the digest could be said again, word for word, from unaltered rows."""
        return not (self.differences or self.altered or self.misnamed)


@dataclass(frozen=True, slots=True, eq=False)
class Said:
    """A slip with what its references mean: as kept, or as worked out afresh."""

    slip: Slip
    statements: Mapping[str, Statement]
    head: Head
    book: Book


def trace(kept: Said, again: Said | None, standing: Standing) -> Trace:
    """Follow every sentence of a digest, and compare it with what the same inputs give now.

    Parameters
    ----------
    kept : Said
        The slip and statements as the edition keeps them, with the rule book that was in use.
    again : Said or None
        The same worked out afresh from rows re-read at the edition's `as_of`; None where the reader would
        get no slip now.
    standing : callable
        The digest of a row's content as it stands, worked out from the content and not read from a column.
    """
    said = _sentences(kept)
    used = {name: kept.statements[name] for name in _used(kept.slip)}
    rows = {name: _rows(each, standing) for name, each in used.items()}
    altered = {
        (row.evidence.table, row.evidence.id, row.evidence.version): row for each in rows.values() for row in each
    }
    return Trace(
        tuple(_source(number, sentence, used, rows) for number, sentence in enumerate(said, 1)),
        tuple(_differences(said, _sentences(again) if again else [])),
        tuple(row for _, row in sorted(altered.items()) if row.found != "same"),
        tuple(sorted(name for name, each in used.items() if _name(each) != name)),
    )


def _sentences(said: Said) -> list[Sentence]:
    return sentences(view(said.slip, said.statements, said.head, said.book))


def _used(slip: Slip) -> set[str]:
    return {name for line in (*slip.asks, *slip.mind, *slip.around) for name in line.statements}


def _name(statement: Statement) -> str:
    return statement_hash(statement.kind, statement.pest, statement.ask, statement.wording, statement.figures)


def _rows(statement: Statement, standing: Standing) -> tuple[Row, ...]:
    return tuple(Row(each, _state(each, standing(each))) for each in statement.evidence)


def _state(evidence: Evidence, digest: str | None) -> str:
    if digest is None:
        return "gone"
    return "same" if digest == evidence.digest else "altered"


def _source(
    number: int, sentence: Sentence, used: Mapping[str, Statement], rows: Mapping[str, tuple[Row, ...]]
) -> Source:
    kind, _, name = sentence.origin.partition(":")
    if kind != "statement":
        return Source(number, sentence, None, None, {}, (), ())
    statement = used[name]
    return Source(number, sentence, name, statement.kind, statement.figures, statement.basis, rows[name])


def _differences(said: Sequence[Sentence], again: Sequence[Sentence]) -> list[Difference]:
    """Sentences that differ, place by place; a sentence that moved is found where it stands now."""
    found = []
    for number, (one, other) in enumerate(zip_longest(said, again), 1):
        if one != other:
            found.append(Difference(number, one.text if one else None, other.text if other else None))
    return found
