"""What the coordinator is shown: signals in a line, an edition's statements in words, and what the gate marks."""

from collections import Counter
from collections.abc import Mapping
from datetime import date, datetime
from typing import Any

from rules.book import Book
from rules.records import Known, Signal, Subscriber
from rules.slip import Edition, Slip
from service import mailing
from service.editions import gate, render
from service.editions.wording import sentences, view
from service.store import editions, network
from service.store.base import Store

Outcome = dict[str, Any]


def signal_line(signal: Signal) -> Outcome:
    """One signal as plain values."""
    return {
        "kind": signal.kind,
        "pest": signal.pest,
        "ask": signal.ask.value,
        "from": signal.first_day,
        "to": signal.last_day,
        "cells": len(signal.cells),
        "rule": f"{signal.rule} at {signal.rule_hash}",
        "rows": len(signal.evidence),
        "figures": dict(signal.figures),
    }


def left_to_send(left: Mapping[str, int]) -> Outcome:
    """How many of an edition's messages wait, and what to say of those that another sending holds."""
    waiting = {"still_to_send": left["queued"] + left["deferred"]}
    if not (count := left["leased"] + left["sending"]):
        return waiting
    words = "held by a sending that is under way or was cut off; send again in a quarter of an hour to take them up"
    return {**waiting, "held_elsewhere": f"{count} {words}"}


def names_now(store: Store, district: str, now: datetime) -> frozenset[str]:
    """People, farms and paddocks as they are called at this moment."""
    with store.reading() as c:
        farms = network.holdings(c, district, now, date.max)
        people, fields = network.people(c, district), network.paddocks(c, district, now)
    return frozenset({p.name for p in people} | {f.name for f in farms} | {f.name for f in fields})


def edition(store: Store, id: str, book: Book, known: Known) -> Outcome:
    """An edition's statements, each as some reader will read it, with how many readers it touches."""
    with store.reading() as c:
        record, statements, held = editions.get(c, id), editions.statements(c, id), editions.held(c, id)
        slips = [slip for piece in editions.slips(c, id) for slip, _ in piece]
        readers = {each.id: each for each in network.subscribers(c, record.district, state=None)}
    says: dict[str, str] = {}
    touched: Counter[str] = Counter()
    marks: dict[tuple[str, str], int] = Counter()
    for slip in slips:
        shown = view(slip, statements, record.head, book)
        mine = {each.origin.partition(":")[2]: each.text for each in sentences(shown) if each.origin in _origins(slip)}
        touched.update(mine.keys())
        says = mine | says
        for _, word, reason in _marks(slip, readers.get(slip.subscriber), record, known, render.render(shown)):
            marks[word, reason] += 1
    return {
        "edition": id,
        "state": record.state,
        "as_of": record.as_of,
        "held_because": record.hold_reason,
        "readers": len(slips),
        "with_asks": sum(bool(slip.asks) for slip in slips),
        "statements": [
            {
                "statement": name,
                "says": says.get(name, "reaches nobody this week"),
                "pest": each.pest,
                "ask": each.ask.value,
                "readers": touched[name],
                **({"held": held[name].reason} if name in held else {}),
            }
            for name, each in sorted(statements.items(), key=lambda item: (-touched[item[0]], item[0]))
        ],
        "marked_words": [
            {"word": word, "reason": reason, "digests": count} for (word, reason), count in sorted(marks.items())
        ],
    }


def _origins(slip: Slip) -> set[str]:
    lines = (*slip.asks, *slip.mind, *slip.around)
    return {f"statement:{name}" for line in lines for name in line.statements}


def _marks(slip: Slip, reader: Subscriber | None, record: Edition, known: Known, rendered: Any) -> list[gate.Mark]:
    allowed = mailing.allowed(reader, record.head, known)
    return gate.check(gate.texts_of(rendered), mailing.names(known), allowed)
