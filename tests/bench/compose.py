"""`compose`: digests of readers over 4,000 cells, as HTML, text and MIME on 2 cores, beside bare Jinja2.

Ours are `render.render` and `mime.build`, which sending calls for each mail, in the processes of `Composers`,
which signing reads all digests with: a reader's few values travel to a process that holds what the readers
share, and the message's bytes come back; making the sentences is in the time. The anchor is the same templates
in plain Jinja2, HTML and text without MIME, on one core, from sentences made beforehand. Each round is a new
week, so that no round finds a card of the round before.
"""

import random
import statistics
import time
from collections.abc import Iterator
from datetime import UTC, datetime
from functools import lru_cache
from typing import Any, NamedTuple

from rules.records import Ask
from rules.slip import Card, Detail, Rendered, Sentence, SlipView
from service.delivery import mime
from service.editions.many import Composers
from service.editions.render import Renderer, render

CELLS, READERS, ROUNDS, CORES = 4_000, 20_000, 3, 2
GOAL = 1.5
SENT = datetime(2026, 5, 12, 2, 0, tzinfo=UTC)
PESTS = ("redlegged earth mites", "lucerne fleas", "cutworms")


class Reader(NamedTuple):
    """What is one reader's own: a number, a cell, a crop, and how many cards of the cell concern them."""

    number: int
    cell: int
    crop: str
    cards: int


def readers() -> list[Reader]:
    """Five readers a cell on average, in the order of their cells, as an edition keeps them."""
    draw = random.Random(20260512)
    cells = sorted(draw.randrange(CELLS) for _ in range(READERS))
    return [
        Reader(number, cell, draw.choice(("canola", "canola", "canola", "lucerne")), draw.choice((0, 1, 1, 2, 2, 3)))
        for number, cell in enumerate(cells)
    ]


def _said(text: str) -> Sentence:
    return Sentence(text, "fixed:bench")


BEFORE = (
    _said("Get the owner's leave before you go in."),
    _said("Clean boots, tools and tyres on the way in and out."),
)
WHEN = _said("Wednesday or Thursday, 11:30–2:30, when it is warm and sunny")
HOW = _said("5 spots, 20 plants each; begin at the edge and along the fence line")
NUMBER = (_said("10 a plant at one true leaf."), _said("Common practice; its doubt is wide."))
CAUTION = _said("Your seed dressing may hide or delay feeding. It still needs a look.")
MIND = (_said("Cutworms: pasture came before this crop."),)
ACTING = _said("Before you act: be sure what it is, ask a licensed adviser, follow the label and local law.")
FOOT = (_said("Your usual crop checks still stand."), _said("Worked out from members' reports and 4 stations."))


@lru_cache(maxsize=20_000)
def _card(week: int, cell: int, crop: str, place: int) -> Card:
    """A card as one cell, crop and stage have it."""
    pest = PESTS[place]
    return Card(
        pest=pest,
        ask=Ask.COUNT if place == 0 else Ask.LOOK,
        minutes=10 + 5 * place,
        title=_said(f"{pest.capitalize()} in young {crop}"),
        what=(_said(f"Found in {cell % 7 + 1} of {cell % 11 + 8} looks within {5 + cell % 20} km since week {week}."),),
        when=WHEN,
        how=HOW,
        number=NUMBER,
        caution=CAUTION,
        details=(Detail("Why we ask", (_said(f"Cell weather of {cell} has likely brought it."),)),),
    )


def view_of(week: int, reader: Reader) -> SlipView:
    """The sentences of one reader."""
    cards = tuple(_card(week, reader.cell, reader.crop, place) for place in range(reader.cards))
    minutes = sum(card.minutes for card in cards)
    answer = f"{len(cards)} to look at, about {minutes} minutes" if cards else "Nothing to do yet"
    return SlipView(
        subject=_said(f"This week: {answer}"),
        day="Tue 12 May",
        answer=_said(answer),
        before_looking=BEFORE,
        cards=cards,
        keep_in_mind=MIND,
        silence=(),
        around=(
            _said(f"{reader.number % 23 + 3} looks within 20 km of you, {reader.number % 5} of them found mites."),
        ),
        note=(_said(f"Thanks to all who looked in week {week}."),),
        signed_by="Ivy Marsh",
        before_acting=ACTING,
        foot=FOOT,
    )


def composed(week: int, reader: Reader) -> bytes:
    """One message, as delivery makes it."""
    return mailed(render(view_of(week, reader)), week, reader)


def mailed(rendered: Rendered, week: int, reader: Reader) -> bytes:
    """A rendered digest as the bytes of a message."""
    return mime.build(
        rendered=rendered,
        sender="digest@leafturn.example",
        sender_name="North Bank digest",
        recipient=f"reader{reader.number}@example.org",
        message_id=f"{week}.{reader.number}@leafturn.example",
        date=SENT,
        show_url=f"https://digest.example/show/{reader.number:060d}",
        unsubscribe_url=f"https://digest.example/unsubscribe/{reader.number:060d}",
        list_id="north.leafturn.example",
    )


def _weekly(_shared: None, item: tuple[int, Reader]) -> bytes:
    """What a worker process makes of one reader; the week travels along, since the processes outlive it."""
    return composed(*item)


def rows(only: str | None = None) -> Iterator[dict[str, Any]]:
    """The row of this bench, if it is asked for."""
    if only and only != "compose":
        return
    ours, bare = [], []
    everyone = readers()
    with Composers(_weekly, None, CORES) as composers:
        _seconds_ours(composers, 0, everyone[:1000])  # start the processes and load the templates
        for week in range(1, ROUNDS + 1):
            ours.append(_seconds_ours(composers, week, everyone))
            bare.append(_seconds_bare(week, everyone))
    ratios = [b / a for a, b in zip(ours, bare, strict=True)]
    yield {
        "bench": "compose",
        "ours_s": round(statistics.median(ours), 3),
        "other_s": round(statistics.median(bare), 3),
        "other_is": f"the same {READERS} digests, bare Jinja2, HTML and text on one core",
        "ratio": round(statistics.median(ratios), 2),
        "goal": GOAL,
        "better": "higher",
    }


def _seconds_ours(composers: Composers[None, tuple[int, Reader], bytes], week: int, everyone: list[Reader]) -> float:
    began = time.perf_counter()
    size = sum(len(message) for message in composers.each((week, reader) for reader in everyone))
    took = time.perf_counter() - began
    if size < 1000 * len(everyone):
        raise RuntimeError("the messages are too small to be digests")
    return took


def _seconds_bare(week: int, everyone: list[Reader]) -> float:
    views = [view_of(week, reader) for reader in everyone]
    bare = Renderer(keep=0)
    began = time.perf_counter()
    for view in views:
        bare.render(view)
    return time.perf_counter() - began


if __name__ == "__main__":
    for row in rows():
        print(row)
