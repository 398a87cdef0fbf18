"""Compose an edition: statements that readers share, and each reader's own references to them.

A pure function of what was known, the rule book and the readers: a draft and the later check of what was
said run the same code.
"""

from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import date
from typing import Any

from rules.book import Book, Pest
from rules.records import Ask, Known, Look, Signal, Subscriber
from rules.slip import Line, Slip, Statement
from service.editions import effort, privacy, rank
from service.editions.gaps import Gaps, gaps
from service.editions.offers import Offer, joined, offers, told_crops
from service.editions.privacy import DISTRICT, OWN, Counts, Near, Vantage, View
from service.editions.quiet import quiet_until
from service.editions.rank import Bundle, Candidate
from service.editions.stands import Stages, Stand, any_stage, at_risk, stands

# How much one digest holds; with these it stays well below the two kilobytes kept for a reader.
MOST_COUNTS = 3
MOST_IN_MIND = 4
MOST_AROUND = 6
MOST_ALSO = 3


@dataclass(frozen=True, slots=True)
class Composed:
    """An edition's content: statements by hash (held ones too), slips by reader."""

    statements: Mapping[str, Statement]
    slips: Mapping[str, Slip]


@dataclass(frozen=True, slots=True, eq=False)
class Scene:
    """What all readers of one edition have in common."""

    known: Known
    book: Book
    seen: View
    stages: Stages
    offers: Sequence[Offer]
    counted: Mapping[str, Sequence[Statement]]  # by pest: counts first, then what to hold against them
    spots: Sequence[int]
    gaps: Gaps


def compose(
    known: Known,
    signals: Sequence[Signal],
    book: Book,
    readers: Sequence[Subscriber],
    held: frozenset[str] = frozenset(),
) -> Composed:
    """Statements and slips of one district's week. Held statements are kept, but no slip refers to them."""
    seen = privacy.view(known, told_crops(signals, known, book))
    offered = offers(signals, known, book, seen)
    counted = effort.statements(known, book.pests) if seen.shown else []
    statements = joined([offer.statement for offer in offered] + counted)
    said = [offer for offer in offered if offer.statement.hash not in held]
    by_pest: dict[str, list[Statement]] = defaultdict(list)
    for statement in counted:
        if statement.hash not in held:
            by_pest[statement.pest].append(statement)
    spots = {spot for there in seen.tallies.values() for spot in there} | {offer.spot for offer in offered}
    placed = sorted(spot for spot in spots if spot is not None)
    scene = Scene(known, book, seen, Stages(known), said, by_pest, placed, gaps(known))
    return Composed(statements, {reader.id: _slip(reader, scene) for reader in readers})


# --- one reader ----------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, eq=False)
class Seat:
    """One reader's place in the scene."""

    reader: Subscriber
    here: Vantage
    cells: frozenset[int]
    near: Mapping[int, Near]
    stands: Sequence[Stand]
    counts: Mapping[str, Counts]  # round the reader, for each pest that may matter to their crops at some stage


def _seat(reader: Subscriber, scene: Scene) -> Seat:
    here = privacy.vantage(reader, scene.known)
    near = here.near(scene.spots)
    crops = stands(reader, scene.known, scene.stages)
    names = {stand.crop for stand in crops}
    pests = sorted(id for id, pest in scene.book.pests.items() if any(risk.crop in names for risk in pest.risks))
    counts = {pest: privacy.counts(scene.seen, pest, reader, here, near) for pest in pests}
    return Seat(reader, here, privacy.own_cells(reader, scene.known), near, crops, counts)


def _slip(reader: Subscriber, scene: Scene) -> Slip:
    seat = _seat(reader, scene)
    candidates = [found for offer in scene.offers if (found := _candidate(offer, seat))]
    awake, resting = _at_risk(candidates, seat, scene)
    stirring = [each for each in candidates if _stirs(each, awake[each.pest])]
    bundles = rank.merge(stirring, awake, scene.known.today)
    asks, mind = rank.choose(bundles, {id: pest.minutes.value for id, pest in scene.book.pests.items()})
    kept = [_mind(bundle, scene) for bundle in mind] + [_resting(pest, day) for pest, day in resting.items()]
    return Slip(
        reader.id,
        tuple(_ask(bundle, seat, scene) for bundle in asks),
        tuple(kept[:MOST_IN_MIND]),
        tuple(_around(seat, scene)),
        _own(seat, scene),
    )


# --- what reaches the reader, and whether it matters now -------------------------------------------


def _candidate(offer: Offer, seat: Seat) -> Candidate | None:
    """How an offer reaches a reader, if it does. Farther than 20 km, it is only to be kept in mind."""
    near = _near(offer, seat)
    if near is None:
        return None
    statement = offer.statement
    ask = Ask.KEEP_IN_MIND if near.band_km is None else statement.ask
    paddock = offer.paddock if near.own else None
    return Candidate(statement.hash, statement.wording, statement.pest, ask, near, offer.day, paddock)


def _near(offer: Offer, seat: Seat) -> Near | None:
    own = offer.paddock is not None and offer.paddock in seat.reader.paddocks
    if offer.statement.wording == "hatch":
        return OWN if offer.cells & seat.cells else None
    if offer.statement.wording == "count":
        return OWN if own else None
    if own:  # the reader has the exact count already
        return None
    if offer.found_in & {*seat.reader.paddocks}:
        return OWN
    return DISTRICT if offer.spot is None else seat.near[offer.spot]


def _at_risk(
    candidates: Sequence[Candidate], seat: Seat, scene: Scene
) -> tuple[dict[str, list[Stand]], dict[str, date]]:
    """By pest: the reader's crops it may matter to now; and the pests that fresh looks of theirs have quieted."""
    awake: dict[str, list[Stand]] = {}
    resting: dict[str, date] = {}
    for pest in sorted({candidate.pest for candidate in candidates}):
        entry = scene.book.pests[pest]
        newest = _newest(pest, candidates, seat, scene)
        looks = _looks_at_home(pest, seat, scene)
        risky = [stand for stand in seat.stands if at_risk(entry, stand)]
        until = [quiet_until(s, entry, looks, newest, scene.stages, scene.known.today) for s in risky]
        awake[pest] = [_placed(s, entry) for s, day in zip(risky, until, strict=True) if day is None]
        if risky and not awake[pest]:
            resting[pest] = min(day for day in until if day is not None)
    return awake, resting


def _looks_at_home(pest: str, seat: Seat, scene: Scene) -> list[Look]:
    """The looks that may quiet an ask: on the reader's own place."""
    found = privacy.own_looks(scene.seen, seat.reader, pest)
    return [look for look in found if privacy.at_home(look, seat.reader, scene.known, seat.here)]


def _newest(pest: str, candidates: Sequence[Candidate], seat: Seat, scene: Scene) -> date:
    """The day of the newest thing that may wake an ask: what a rule saw, or a find near."""
    days = [each.day for each in candidates if each.pest == pest]
    find = privacy.last_find_near(scene.seen, pest, seat.reader, seat.near)
    return max(days if find is None else [*days, find])


def _placed(stand: Stand, entry: Pest) -> Stand:
    """A stand whose stage does not matter to the pest says so."""
    whatever = stand.code is None and any_stage(entry, stand.crop)
    return replace(stand, at="any") if whatever else stand


def _stirs(candidate: Candidate, awake: Sequence[Stand]) -> bool:
    """A count in a paddock speaks only while the pest matters to that paddock's crop."""
    return candidate.paddock is None or any(stand.paddock == candidate.paddock for stand in awake)


# --- references and the reader's own values --------------------------------------------------------


def _ask(bundle: Bundle, seat: Seat, scene: Scene) -> Line:
    chosen = _best(bundle)
    counted = chosen[0].paddock
    stands = sorted(bundle.stands, key=lambda stand: counted is not None and stand.paddock != counted)
    own = _stand_values(stands)
    own["minutes"] = scene.book.pests[bundle.pest].minutes.value
    own["near"] = [_near_value(each.near) for each in chosen]
    own["found"] = _found(seat.counts[bundle.pest]) if _may_count(bundle.pest, scene) else [0, 0, 0]
    names = [scene.known.paddocks[each.paddock].name for each in chosen if each.paddock]
    if names:
        own["paddocks"] = names
    return Line(tuple(each.statement for each in chosen), own)


def _best(bundle: Bundle) -> list[Candidate]:
    """The best statement of each sort, and up to three own counts; strongest first."""
    chosen: list[Candidate] = []
    for each in bundle.candidates:
        same = sum(other.wording == each.wording for other in chosen)
        if same < (MOST_COUNTS if each.paddock else 1) and each.statement not in {c.statement for c in chosen}:
            chosen.append(each)
    return chosen


def _stand_values(stands: Sequence[Stand]) -> dict[str, Any]:
    first = stands[0]
    own: dict[str, Any] = {"crop": first.crop, "at": first.at}
    also = list(dict.fromkeys(stand.crop for stand in stands if stand.crop != first.crop))
    if first.code is not None:
        own["code"] = first.code
    if any(stand.dressed for stand in stands if stand.crop == first.crop):
        own["dressed"] = True
    if also:
        own["also"] = also[:MOST_ALSO]
    return own


def _near_value(near: Near) -> list[Any] | str | None:
    if near.own:
        return "own"
    return None if near.band_km is None else [near.band_km, near.direction, near.doubt_km]


def _mind(bundle: Bundle, scene: Scene) -> Line:
    first = bundle.candidates[0]
    own = _stand_values(bundle.stands) | {"near": [_near_value(first.near)]}
    if first.paddock:
        own["paddock"] = scene.known.paddocks[first.paddock].name
    return Line((first.statement,), own)


def _resting(pest: str, until: date) -> Line:
    return Line((), {"pest": pest, "until": until.isoformat()})


def _around(seat: Seat, scene: Scene) -> list[Line]:
    """What others found, for the pests of the reader's crops; finds near first."""
    lines = []
    for pest, found in seat.counts.items():
        if said := _counted(pest, scene):
            rank_by = (-found.near_finds, -found.near_looks, pest)
            lines.append((rank_by, Line(tuple(each.hash for each in said), {"found": _found(found)})))
    return [line for _, line in sorted(lines, key=lambda pair: pair[0])][:MOST_AROUND]


def _counted(pest: str, scene: Scene) -> Sequence[Statement]:
    """The counts of a pest and what to hold against them; nothing where the counts are held."""
    said = scene.counted.get(pest, ())
    return said if said and said[0].wording == "looks" else ()


def _may_count(pest: str, scene: Scene) -> bool:
    """Whether a reader may be told how often a pest was found: always of their own looks."""
    return not scene.seen.shown or bool(_counted(pest, scene))


def _found(counts: Counts) -> list[int]:
    return [counts.near_finds, counts.near_looks, counts.near_own]


def _own(seat: Seat, scene: Scene) -> dict[str, Any]:
    """How much looking stands behind the silence where nothing is asked, and whether weather is missing."""
    told = {pest: each for pest, each in seat.counts.items() if _may_count(pest, scene)}
    own: dict[str, Any] = {
        "looks": sum(each.near_looks for each in seat.counts.values()),
        "yours": sum(each.near_own for each in seat.counts.values()),
        "finds": sum(each.near_finds for each in told.values()),
    }
    if any(each.near_looks for pest, each in seat.counts.items() if pest not in told):
        own["kept"] = True  # looks of which it may not be said whether they found something
    if not scene.seen.shown:
        own["hidden"] = True
    elif unlooked := [pest for pest, each in seat.counts.items() if not each.looks]:
        own["unlooked"] = unlooked[:MOST_AROUND]
    if missing := scene.gaps.near(seat.cells):
        own["weather"] = [missing, scene.gaps.days]
    return own
