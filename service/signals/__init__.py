"""What the live rules say of a district at a moment: one file per kind, each a pure function of what is known."""

from collections.abc import Callable

from rules.book import Book, Pest, Rule
from rules.records import Known, Signal
from service.signals import first_seen, hatch, threshold

KINDS: dict[str, Callable[[Known, Rule, Pest], list[Signal]]] = {
    "hatch": hatch.evaluate,
    "threshold": threshold.evaluate,
    "first_seen": first_seen.evaluate,
}


def evaluate(known: Known, book: Book) -> list[Signal]:
    """All signals of the live rules; rules in the book's order, each kind's signals in its own."""
    return [
        signal
        for rule in book.rules
        if rule.status == "live"
        for signal in KINDS[rule.kind](known, rule, book.pests[rule.pest])
    ]
