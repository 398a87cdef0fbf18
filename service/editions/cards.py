"""One ask as a card of at most 60 words with its labels; what does not fit stands one tap away."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from rules.book import LIVE_MARKS, Book, Pest, Sourced
from rules.slip import Card, Detail, Line, Sentence, Statement
from service.editions import sentences as say
from service.editions.told import ADVISER, NO_NUMBER, against, besides, origin, told, verdict, why

WORDS = 51  # of the 60; the rest is for the card's labels
NOT_UP_YET = "Not up? Weeds, pasture edge, fence line."
NOT_KNOWN = "It is not yet known how often this is right."
WHERE_UP = {"reported", "up", "any"}


@dataclass(frozen=True, slots=True)
class Piece:
    """A sentence for the card: the part it belongs to, and where it goes if there is no room and no must."""

    part: str  # what, number, caution
    sentence: Sentence
    heading: str = "More"
    must: bool = False


def card(line: Line, statements: Mapping[str, Statement], book: Book) -> Card:
    """The card of one ask."""
    said = [statements[name] for name in line.statements]
    first, pest = said[0], book.pests[said[0].pest]
    title = Sentence(_title(line, pest, book, counted=first.wording == "count"), origin(first))
    when = Sentence(pest.when[0].value, f"catalogue:{pest.id}.when")
    how = Sentence(_how(pest, line), f"catalogue:{pest.id}.spots")
    left = WORDS - sum(_words(each) for each in (title, when, how))
    kept, moved = _fit(_pieces(line, said, pest, book), left)
    cautions = [piece.sentence for piece in kept if piece.part == "caution"]
    return Card(
        pest=pest.id,
        ask=first.ask,
        minutes=line.own["minutes"],
        title=title,
        what=tuple(piece.sentence for piece in kept if piece.part == "what"),
        when=when,
        how=how,
        number=tuple(piece.sentence for piece in kept if piece.part == "number"),
        caution=cautions[0] if cautions else None,
        details=tuple(_details(said, pest, moved, line, book)),
    )


def _title(line: Line, pest: Pest, book: Book, *, counted: bool) -> str:
    crop, many = say.crop(book, line.own["crop"]), say.capital(pest.plural)
    stage = say.stage(book, line.own["crop"], line.own.get("code"))
    if counted or line.own["at"] == "any":
        return f"{many} in {crop}"
    return {
        "reported": f"{many} in {crop} ({stage})",
        "up": f"{many} in {crop} that is up",
        "sown": f"{many} in {crop} (may be up)",
        "before": f"{many} before your {crop} is up",
        "unknown": f"{many}, if your {crop} is up",
    }[line.own["at"]]


def _how(pest: Pest, line: Line) -> str:
    spots = say.how_many(pest.spots.value, "spot")
    if line.own["at"] == "before":
        return f"{spots}."
    units = pest.units_per_spot.value
    one, many = say.COUNTED[pest.unit]
    return f"{spots}, {one if units == 1 else f'{units} {many}'} each."


def _fit(pieces: Sequence[Piece], left: int) -> tuple[list[Piece], list[Piece]]:
    """The pieces there is room for, in their order; the others are moved, none is lost."""
    kept: list[Piece] = []
    moved: list[Piece] = []
    for piece in pieces:
        words = _words(piece.sentence)
        fits = piece.must or words <= left
        (kept if fits else moved).append(piece)
        left -= words if fits else 0
    return kept, moved


def _words(sentence: Sentence) -> int:
    return len(sentence.text.split())


# --- the pieces, most needed first -------------------------------------------------------------------


def _pieces(line: Line, said: Sequence[Statement], pest: Pest, book: Book) -> list[Piece]:
    first = said[0]
    paddocks = [*line.own.get("paddocks", ())]
    names = [paddocks.pop(0) if each.wording == "count" and paddocks else None for each in said]
    sentences = [told(*each) for each in zip(said, line.own["near"], names, strict=True)]
    pieces = [Piece("what", sentences[0], must=True)]
    if first.wording == "count":
        pieces.append(Piece("what", verdict(first, pest.relook_days.value), must=True))
    else:  # whoever has counted knows where to look
        pieces += _stage_pieces(line, pest, book)
    pieces += _own_caution(pest, book)
    pieces += _number(line, first, pest, book)
    pieces += [Piece("what", more) for each in said if (more := besides(each))]
    pieces += _found(line)
    for each, sentence in zip(said[1:], sentences[1:], strict=True):
        pieces.append(Piece("what", sentence))
        if each.wording == "count":
            pieces.append(Piece("what", verdict(each, pest.relook_days.value)))
    return pieces + _also(line, book) + _where(line, pest)


def _stage_pieces(line: Line, pest: Pest, book: Book) -> list[Piece]:
    """Where to look before the crop is up, and what a seed dressing changes."""
    at, code = line.own["at"], line.own.get("code")
    pieces = []
    if at == "before":
        before = Sentence(pest.before_up.value, f"catalogue:{pest.id}.before_up")
        pieces.append(Piece("what", before, must=True))
    elif at in ("sown", "unknown"):
        pieces.append(Piece("what", Sentence(NOT_UP_YET, "fixed:not_up_yet"), must=True))
    entry = book.crops.get(line.own["crop"])
    early = at not in ("before", "any") and (code is None or entry is None or code <= entry.seedling_to)
    dressed = [each for each in book.cautions if "dressed" in each.when]
    if line.own.get("dressed") and early:
        pieces += [Piece("what", Sentence(each.text, f"caution:{each.id}"), must=True) for each in dressed]
    return pieces


def _number(line: Line, first: Statement, pest: Pest, book: Book) -> list[Piece]:
    if first.wording == "count":
        number = against(first)
        return [] if number is None else [Piece("number", number, must=True)]
    if line.own["at"] == "before":
        return []
    code, name = line.own.get("code"), f"catalogue:{pest.id}.thresholds"
    found = say.threshold(pest, line.own["crop"], code)
    if found is None:
        return [Piece("number", Sentence("No agreed number.", name), "The number")]
    stages = [say.stage(book, line.own["crop"], each) for each in (found.stage_from, found.stage_to)]
    at = "" if code is not None else f", {stages[0]} to {stages[1]}"
    text = (
        f"{say.between(found.low, found.high)} {say.A_UNIT[found.unit]}{at} ({say.source(found.mark, found.source)})."
    )
    return [Piece("number", Sentence(text, name), "The number")]


def _own_caution(pest: Pest, book: Book) -> list[Piece]:
    return [Piece("caution", each) for each in cautions_of(pest, book)[:1]]


def cautions_of(pest: Pest, book: Book) -> list[Sentence]:
    """What a look for this pest needs to be safe, besides the general cautions."""
    needs = {name for name in ("night", "lifts_cover") if getattr(pest, name)}
    return [Sentence(each.text, f"caution:{each.id}") for each in book.cautions if needs & {*each.when}]


def _found(line: Line) -> list[Piece]:
    finds, looks, own = line.own["found"]
    if not looks:
        return []
    text = f"{say.capital(say.of_looks(finds, looks))} within 20 km{say.yours(own, looks)}."
    return [Piece("what", Sentence(text, "reader:found"), "What others found")]


def _also(line: Line, book: Book) -> list[Piece]:
    crops = [f"your {say.crop(book, id)}" for id in line.own.get("also", ())]
    return [Piece("what", Sentence(f"Also in {say.listed(crops)}.", "reader:crops"), "Where")] if crops else []


def _where(line: Line, pest: Pest) -> list[Piece]:
    if line.own["at"] == "before":
        return []
    return [Piece("what", Sentence(pest.where.value, f"catalogue:{pest.id}.where"), "Where")]


# --- one tap away ------------------------------------------------------------------------------------


def _details(said: Sequence[Statement], pest: Pest, moved: Sequence[Piece], line: Line, book: Book) -> list[Detail]:
    details = {"Why we ask": [*(each for statement in said for each in why(statement))]}
    details["Why we ask"].append(Sentence(NOT_KNOWN, "fixed:not_known"))
    for piece in moved:
        if piece.part == "what":  # the number is said in full below, the caution above the first card
            details.setdefault(piece.heading, []).append(piece.sentence)
    details["The number"] = _numbers(line, pest, book)
    details["What the damage looks like"] = _facts(pest, "damage", [pest.damage])
    details["How to look"] = _facts(pest, "method", [pest.method]) + _facts(pest, "when", pest.when[1:])
    details["Easily taken for it"] = [
        Sentence(f"{say.capital(each.name)}: {each.apart}", f"catalogue:{pest.id}.lookalikes")
        for each in pest.lookalikes
    ]
    details["Beneficials"] = _facts(pest, "beneficials", [pest.beneficials])
    details["Good to know"] = _facts(pest, "notes", pest.notes)
    return [Detail(heading, tuple(sentences)) for heading, sentences in details.items() if sentences]


def _facts(pest: Pest, name: str, facts: Sequence[Sourced]) -> list[Sentence]:
    """Facts of the catalogue, without those known from memory only."""
    return [Sentence(each.value, f"catalogue:{pest.id}.{name}") for each in facts if each.mark in LIVE_MARKS]


def _numbers(line: Line, pest: Pest, book: Book) -> list[Sentence]:
    """Every number for the crop, with its stages, doubt and source, and what it is not."""
    crop = line.own["crop"]
    found = []
    for each in pest.thresholds:
        if each.crop == crop and each.mark in LIVE_MARKS:
            first, last = (say.stage(book, crop, code) for code in (each.stage_from, each.stage_to))
            stages = first if first == last else f"{first} to {last}"
            number = f"{say.between(each.low, each.high)} {say.A_UNIT[each.unit]}"
            text = f"{say.capital(stages or crop)}: {number} ({say.reference(each.mark, each.source)}). {each.note}"
            found.append(Sentence(text.strip(), f"catalogue:{pest.id}.thresholds"))
    if say.threshold(pest, crop, line.own.get("code")) is None:
        found.insert(0, Sentence(NO_NUMBER, f"catalogue:{pest.id}.thresholds"))
    if any(each.crop == crop and each.mark in LIVE_MARKS for each in pest.thresholds):
        found.append(Sentence(f"At or above the number: {ADVISER}.", "fixed:number"))
    return found
