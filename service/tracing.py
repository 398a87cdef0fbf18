"""The trail of one digest: read its rows again, work it out again, render it again, compare bytes."""

from collections.abc import Callable
from datetime import date
from typing import Any

from rules.book import Book
from rules.digests import digest
from rules.records import Evidence, Known
from rules.slip import Basis, Edition
from service import mailing
from service.editions import render
from service.editions import trail as compared
from service.editions.compose import Composed
from service.editions.trail import Difference, Row, Said, Source, Standing, Trace
from service.editions.wording import view
from service.store import observations
from service.store import weather as weather_store
from service.store.base import Store
from service.store.observation_digest import content_digest

Outcome = dict[str, Any]
Again = Callable[[], tuple[Known, Composed]]
NO_ROWS = {
    "caution": "a caution of the catalogue",
    "fixed": "a sentence that stands in every digest",
    "catalogue": "the catalogue",
    "reader": "the reader's own values",
    "note": "the coordinator's note",
    "weather": "the weather's source",
}


def trail(store: Store, edition: Edition, reader: str, book: Book, again: Again, sentence: str | None) -> Outcome:
    """Follow a reader's digest, or the sentences of it that hold some words, and say it again."""
    kept_slip, statements, kept_hash = mailing.kept(store, edition.id, reader)
    known, composed = again()
    kept = Said(kept_slip, statements, edition.head, book)
    slip = composed.slips.get(reader)
    fresh = None if slip is None else Said(slip, composed.statements, edition.head, book)
    trace = compared.trace(kept, fresh, _standing(store, known))
    others = mailing.changed(edition, mailing.hashes(book))
    equal, how = _compare(trace, fresh, kept_hash, others)
    chosen = [each for each in trace.sources if sentence is None or sentence.lower() in each.sentence.text.lower()]
    return {
        "edition": edition.id,
        "reader": reader,
        "as_of": edition.as_of,
        "equal": equal,
        "compared": how,
        "sentences": [_source(each) for each in chosen],
        "altered_rows": [_row(each) for each in trace.altered],
        "said_otherwise": [_difference(each) for each in trace.differences],
        "altered_statements": list(trace.misnamed),
    }


def _compare(trace: Trace, fresh: Said | None, kept_hash: str | None, others: list[str]) -> tuple[bool, str]:
    """Whether the digest was said again, and what was compared: bytes where that can be, else hashes."""
    if kept_hash is None:
        return trace.same, "not signed yet; compared by sentences and by the hashes of rows and statements"
    if fresh is None:
        return False, "worked out again, this reader would get no digest"
    again = mailing.canonical_hash(render.render(view(fresh.slip, fresh.statements, fresh.head, fresh.book)))
    if again == kept_hash and not trace.same:
        return False, "the bytes are equal, but rows or statements behind them were altered"
    if again == kept_hash:
        return True, "subject, text and HTML, rendered again from the rows, are equal to the byte"
    if others:
        names = ", ".join(others)
        return trace.same, f"{names} changed since, so bytes can't be compared; hashes of rows and statements were"
    return False, "subject, text and HTML, rendered again, are other bytes than those signed"


def _standing(store: Store, known: Known) -> Standing:
    """The digest of a row worked out from what stands in the store now, not from its digest column."""

    def digest_of(evidence: Evidence) -> str | None:
        if evidence.table == "paddock":
            paddock = known.paddocks.get(evidence.id)
            return digest(paddock) if paddock else None
        with store.reading() as c:
            if evidence.table == "observation":
                row = observations.get(c, evidence.id, evidence.version)
                return content_digest(row) if row else None
            station, _, day = evidence.id.rpartition("/")
            found = weather_store.get_station_day(c, station, date.fromisoformat(day), evidence.version)
            return weather_store.content_digest(found) if found else None

    return digest_of


# --- in plain values ----------------------------------------------------------------------------


def _source(each: Source) -> Outcome:
    if each.statement is None:
        kind, _, name = each.sentence.origin.partition(":")
        return {"number": each.number, "text": each.sentence.text, "from": f"{NO_ROWS.get(kind, kind)} {name}".strip()}
    return {
        "number": each.number,
        "text": each.sentence.text,
        "from": f"statement {each.statement}",
        "kind": each.kind,
        "figures": dict(each.figures),
        "rules": [_basis(basis) for basis in each.basis],
        "rows": [_row(row) for row in each.rows],
    }


def _basis(basis: Basis) -> str:
    return f"rule {basis.rule} at {basis.rule_hash}, signal {basis.signal}"


def _row(row: Row) -> Outcome:
    one = row.evidence
    return {"table": one.table, "id": one.id, "version": one.version, "now": row.found, **one.detail}


def _difference(each: Difference) -> Outcome:
    return {"number": each.number, "said": each.said, "again": each.again}
