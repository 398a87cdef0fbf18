"""What the signals of a week let an edition say, and from where each statement reaches readers."""

from collections import defaultdict
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import date
from typing import Any

from rules.book import LIVE_MARKS, Book, Pest
from rules.digests import plain
from rules.records import Ask, Known, Observation, Signal
from rules.slip import Basis, Statement, statement_hash
from service.editions.privacy import Crops, View, farms_of

HAPPENED = {"hatch": "met_day", "threshold": "day", "first_seen": "day"}  # the figure that says when


@dataclass(frozen=True, slots=True)
class Offer:
    """A statement with the places or the paddock from which it reaches readers."""

    statement: Statement
    day: date
    cells: frozenset[int] = frozenset()  # weather: readers with a paddock or postcode in one of these
    spot: int | None = None  # the public cell of someone's find
    paddock: str | None = None
    found_in: frozenset[str] = frozenset()  # the paddocks of a find


def told_crops(signals: Sequence[Signal], known: Known, book: Book) -> dict[str, Crops]:
    """Rows of which a statement to others lets guess the crop: a count is compared only in crops with a number.

    Where the growers of those crops can't hide each other, nothing is said to others, and nothing is told.
    """
    farms = farms_of(known)
    found: dict[str, Crops] = {}
    for signal in signals:
        if signal.kind == "threshold" and _was_compared(signal):
            crops = with_number(book.pests[signal.pest])
            if farms.blur(crops).district_hides:
                found |= dict.fromkeys(_counted(signal, known), crops)
    return found


def with_number(pest: Pest) -> Crops:
    """The crops in which a count of a pest has a number to be compared with."""
    return frozenset(each.crop for each in pest.thresholds if each.mark in LIVE_MARKS)


def _counted(signal: Signal, known: Known) -> list[str]:
    keys, day = {row.id for row in signal.evidence}, date.fromisoformat(signal.figures["day"])
    return [row.key for row in known.observations if row.key in keys and row.pest == signal.pest and row.day == day]


def offers(signals: Sequence[Signal], known: Known, book: Book, seen: View) -> list[Offer]:
    """All that may be said; nothing of anyone's rows but their public cell, save to themselves."""
    return [offer for signal in signals for offer in _offers(signal, known, book, seen)]


def _offers(signal: Signal, known: Known, book: Book, seen: View) -> Iterator[Offer]:
    """What one signal lets an edition say, and to whom."""
    day = date.fromisoformat(signal.figures[HAPPENED[signal.kind]])
    if signal.kind == "hatch":
        yield Offer(_statement(signal, "hatch", signal.figures), day, frozenset(signal.cells))
    elif signal.kind == "threshold":
        exact = {**signal.figures, "paddock": signal.paddock}
        yield Offer(_statement(signal, "count", exact), day, paddock=signal.paddock)
        if _was_compared(signal):
            yield from _counted_near(signal, day, known, book, seen)
    elif seen.shown:
        yield from _first_seen(signal, day, known, seen)


def _was_compared(signal: Signal) -> bool:
    """Whether a count was set against the number. One that was not is answered to its owner, and no news to others."""
    return bool(signal.figures["verdict"] != "count_by_spots")


def _counted_near(signal: Signal, day: date, known: Known, book: Book, seen: View) -> Iterator[Offer]:
    """What others learn of a count: that there was one, and near which public cell; not how it turned out."""
    crops = with_number(book.pests[signal.pest])
    if seen.farms.blur(crops).district_hides and signal.figures["mean"]:
        spot = seen.public(_cell(signal, known), crops)
        near = _statement(signal, "counted_near", {"spot": spot}, Ask.LOOK)
        yield Offer(near, day, spot=spot, paddock=signal.paddock)


def _first_seen(signal: Signal, day: date, known: Known, seen: View) -> Iterator[Offer]:
    """The season's first find, without its day and whatever its crop, which could give away whose it was.

    Finds of that day in other public cells are as much the first; each is told from its own.
    """
    keys = {each.id for each in signal.evidence}
    figures = {name: value for name, value in signal.figures.items() if name not in ("cell", "day")}
    spots: dict[int | None, list[Observation]] = defaultdict(list)
    for row in known.observations:
        if row.key in keys and row.present and row.day == day:
            spots[seen.spot(sorted(keys), row.place.cell)].append(row)
    for spot, rows in spots.items():
        found_in = frozenset(row.paddock for row in rows if row.paddock)
        said = _statement(signal, "first_seen", {**figures, "spot": spot}, Ask.LOOK)
        yield Offer(said, day, spot=spot, found_in=found_in)


def _cell(signal: Signal, known: Known) -> int:
    paddock = known.paddocks.get(signal.paddock or "")
    return signal.cells[0] if paddock is None else paddock.place.cell


def _statement(signal: Signal, wording: str, figures: Mapping[str, Any], ask: Ask | None = None) -> Statement:
    said = plain(figures)
    name = statement_hash(signal.kind, signal.pest, ask or signal.ask, wording, said)
    basis = (Basis(signal.id, signal.rule, signal.rule_hash),)
    return Statement(name, signal.kind, signal.pest, ask or signal.ask, wording, said, basis, signal.evidence)


def joined(statements: Sequence[Statement]) -> dict[str, Statement]:
    """Statements by hash; two that say the same are one, resting on both signals' rows."""
    found: dict[str, Statement] = {}
    for each in statements:
        same = found.get(each.hash)
        found[each.hash] = each if same is None else _both(same, each)
    return dict(sorted(found.items()))


def _both(one: Statement, other: Statement) -> Statement:
    basis = sorted({*one.basis, *other.basis}, key=lambda each: each.signal)
    rows = {(row.table, row.id, row.version): row for row in (*one.evidence, *other.evidence)}
    evidence = tuple(rows[key] for key in sorted(rows))
    return Statement(one.hash, one.kind, one.pest, one.ask, one.wording, one.figures, tuple(basis), evidence)
