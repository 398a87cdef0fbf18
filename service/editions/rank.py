"""What comes first: how near × how much it matters to the reader's crops × how new, within a week's limit.

All weights are our choice, without a source; only their order is meant.
"""

from collections import defaultdict
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import date

from rules.records import Ask
from service.editions.privacy import Near
from service.editions.stands import Stand

MOST_ASKS = 3
MOST_MINUTES = 45
STRENGTH = {Ask.KEEP_IN_MIND: 0, Ask.LOOK: 1, Ask.COUNT: 2}
NEARNESS = {0: 1.0, 5: 0.9, 10: 0.7, 20: 0.5, None: 0.25}  # by the band's upper end [km]
MATTERS = {"reported": 1.0, "any": 0.9, "up": 0.9, "sown": 0.8, "before": 0.7, "unknown": 0.6}
NEWNESS = ((7, 1.0), (14, 0.7), (28, 0.5))  # days old at most, weight
OLD = 0.3
SAYS_MORE = ("count", "hatch", "first_seen", "counted_near")  # between equals, which wording goes first


@dataclass(frozen=True, slots=True)
class Candidate:
    """A statement that reaches a reader, and how."""

    statement: str
    wording: str
    pest: str
    ask: Ask
    near: Near
    day: date  # when it happened
    paddock: str | None = None  # the reader's own, where it is about one


@dataclass(frozen=True, slots=True)
class Bundle:
    """All that reaches a reader about one pest: one card, because method and hours are the pest's."""

    pest: str
    ask: Ask
    score: float
    stands: tuple[Stand, ...]  # the crops it matters to, most sure first
    candidates: tuple[Candidate, ...]  # strongest first


def score(near: Near, at: str, age_days: int) -> float:
    """Nearness × matters × newness, each from 0 to 1."""
    new = next((weight for days, weight in NEWNESS if age_days <= days), OLD)
    return NEARNESS[near.band_km] * MATTERS[at] * new


def merge(candidates: Iterable[Candidate], stands: Mapping[str, Sequence[Stand]], today: date) -> list[Bundle]:
    """One bundle a pest, best first; the strongest ask wins. A pest without a stand at risk has no bundle."""
    by_pest: dict[str, list[Candidate]] = defaultdict(list)
    for candidate in candidates:
        by_pest[candidate.pest].append(candidate)
    found = [_bundle(pest, by_pest[pest], stands[pest], today) for pest in by_pest if stands.get(pest)]
    return sorted(found, key=lambda bundle: (-bundle.score, -STRENGTH[bundle.ask], bundle.pest))


def _bundle(pest: str, candidates: Sequence[Candidate], stands: Sequence[Stand], today: date) -> Bundle:
    surest = sorted(stands, key=lambda stand: -MATTERS[stand.at])  # stable: then the reader's own order

    def weight(each: Candidate) -> float:
        return score(each.near, surest[0].at, (today - each.day).days)

    def order(each: Candidate) -> tuple[float, float, int, str]:
        return -STRENGTH[each.ask], -weight(each), SAYS_MORE.index(each.wording), each.statement

    ordered = sorted(candidates, key=order)
    return Bundle(pest, ordered[0].ask, max(map(weight, ordered)), tuple(surest), tuple(ordered))


def choose(bundles: Sequence[Bundle], minutes: Mapping[str, int]) -> tuple[list[Bundle], list[Bundle]]:
    """The asks of the week, best first, and what is only to be kept in mind.

    At most three asks and 45 minutes; what no longer fits is kept in mind, and a shorter one may take its place.
    """
    asks: list[Bundle] = []
    mind: list[Bundle] = []
    left = MOST_MINUTES
    for bundle in bundles:
        fits = len(asks) < MOST_ASKS and minutes[bundle.pest] <= left
        if bundle.ask != Ask.KEEP_IN_MIND and fits:
            asks.append(bundle)
            left -= minutes[bundle.pest]
        else:
            mind.append(bundle)
    return asks, mind
