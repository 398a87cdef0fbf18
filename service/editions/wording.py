"""A slip's references become sentences, each with its origin: the same references always say the same.

Nothing but the slip, its statements, the edition's head and the rule book is read here.
"""

from collections.abc import Mapping, Sequence
from datetime import date
from typing import Any

from rules.book import Book
from rules.records import Ask
from rules.slip import Card, Head, Line, Sentence, Slip, SlipView, Statement
from service.editions import sentences as say
from service.editions.cards import card, cautions_of
from service.editions.told import origin, told, verdict

USUAL = "Your usual crop checks still stand."
HOW = (
    "Worked out from looks that people reported (one visit for one pest is one look), weather records and "
    "published rules."
)
NOT_KNOWN = "It is not yet known how often asks like these are right."


def view(slip: Slip, statements: Mapping[str, Statement], head: Head, book: Book) -> SlipView:
    """One reader's digest in reading order."""
    cards = tuple(card(line, statements, book) for line in slip.asks)
    return SlipView(
        subject=_subject(cards, slip, book),
        day=say.day(head.day),
        answer=_answer(cards, slip, book),
        before_looking=_before_looking(cards, head, book),
        cards=cards,
        keep_in_mind=tuple(_mind(line, statements, book) for line in slip.mind),
        silence=() if cards else (*_silence(slip, head), *_weather(slip)),
        around=tuple(_around(slip, statements, head, book)),
        note=(Sentence(head.note, "note"),) if head.note else (),
        signed_by=head.signed_by,
        before_acting=_before_acting(book),
        foot=tuple(_foot(cards, slip, head)),
    )


def sentences(shown: SlipView) -> list[Sentence]:
    """Every sentence of a digest, in reading order: what the trail counts by."""
    found = [shown.subject, shown.answer, *shown.before_looking]
    for each in shown.cards:
        found += [each.title, *each.what, each.when, each.how, *each.number]
        found += [each.caution] if each.caution else []
        found += [sentence for detail in each.details for sentence in detail.sentences]
    found += [*shown.keep_in_mind, *shown.silence, *shown.around, *shown.note, shown.before_acting, *shown.foot]
    return found


# --- the answer first ------------------------------------------------------------------------------


def _subject(cards: Sequence[Card], slip: Slip, book: Book) -> Sentence:
    if not cards:
        known = "no special look asked" if _looked(slip) else "nobody looked for your crops' pests near you"
        return Sentence(f"This week: {known}; your usual crop checks still stand", "reader:looks")
    asks = [f"{_verb(each)} {book.pests[each.pest].plural}" for each in cards]
    return Sentence(f"This week: {say.listed(asks)}, about {_minutes(cards)} minutes", "reader:asks")


def _verb(each: Card) -> str:
    return "count" if each.ask == Ask.COUNT else "look for"


def _minutes(cards: Sequence[Card]) -> int:
    return sum(each.minutes for each in cards)


def _answer(cards: Sequence[Card], slip: Slip, book: Book) -> Sentence:
    if cards:
        pests = ", then ".join(book.pests[each.pest].plural for each in cards)
        return Sentence(f"{_tasks(cards)}, about {_minutes(cards)} minutes: {pests}.", "reader:asks")
    if not _looked(slip):
        text = "Nobody looked for your crops' pests within 20 km, so we can't point you to one this week."
    elif slip.own["finds"]:
        text = "We ask for no special look this week, though pests of your crops were found within 20 km."
    else:
        text = "No special look this week."
    return Sentence(f"{text} {USUAL}", "reader:looks")


def _looked(slip: Slip) -> bool:
    """Whether it is known that someone looked near the reader, or may not be said."""
    return bool(slip.own["looks"] or slip.own.get("hidden"))


def _tasks(cards: Sequence[Card]) -> str:
    """Such as *Two looks* or *One count and one look*."""
    counts = sum(each.ask == Ask.COUNT for each in cards)
    said = [(counts, "count"), (len(cards) - counts, "look")]
    return say.capital(say.listed([f"{say.in_words(n)} {word}{'s' if n > 1 else ''}" for n, word in said if n]))


def _before_looking(cards: Sequence[Card], head: Head, book: Book) -> tuple[Sentence, ...]:
    """General cautions, once, above the first ask; and those of its own that a full card had no room for."""
    if not cards:
        return ()
    wanted = {"always", "warm"} if head.warm_half else {"always"}
    general = [Sentence(each.text, f"caution:{each.id}") for each in book.cautions if wanted & {*each.when}]
    own = [(shown, each) for shown in cards for each in cautions_of(book.pests[shown.pest], book)]
    return tuple(dict.fromkeys([*general, *(each for shown, each in own if each != shown.caution)]))


def _before_acting(book: Book) -> Sentence:
    acting = next(each for each in book.cautions if "acting" in each.when)
    return Sentence(acting.text, f"caution:{acting.id}")


# --- what is only known ----------------------------------------------------------------------------


def _mind(line: Line, statements: Mapping[str, Statement], book: Book) -> Sentence:
    """One line, no card."""
    if not line.statements:
        many = say.capital(book.pests[line.own["pest"]].plural)
        text = f"{many}: you looked without a find; look again from {say.day(line.own['until'])}."
        return Sentence(text, "reader:own_look")
    statement = statements[line.statements[0]]
    pest = book.pests[statement.pest]
    if statement.wording == "count":
        counted = told(statement, "own", line.own["paddock"]).text
        said = f"{counted} {verdict(statement, pest.relook_days.value).text}"
    else:
        text = told(statement, line.own["near"][0]).text
        said = text[:1].lower() + text[1:]
    return Sentence(f"{say.capital(pest.plural)}: {said}", origin(statement))


def _silence(slip: Slip, head: Head) -> list[Sentence]:
    """Where nothing is asked: how much looking stands behind that. Never an all-clear."""
    looks = slip.own["looks"]
    if slip.own.get("hidden"):
        return [_hidden(head)]
    if not looks:
        text = (
            "Nobody looked for your crops' pests within 20 km in the last 14 days, so this says nothing of them there."
        )
        return [Sentence(text, "reader:looks")]
    yours = say.yours(slip.own["yours"], looks).removeprefix(", ")
    made = f"in the last 14 days, {say.how_many(looks, 'look')}{f' ({yours})' if yours else ''} "
    made += f"{'was' if looks == 1 else 'were'} made within 20 km"
    if not slip.own["finds"] and not slip.own.get("kept"):
        text = f"Nothing was reported near you: {made}. That does not rule pests out."
    else:
        text = f"{say.capital(made)}. Our rules ask for no special look this week; that does not rule pests out."
    return [Sentence(text, "reader:looks")]


def _weather(slip: Slip) -> list[Sentence]:
    """Weather that is missing near the reader: no word of a hatch says nothing then."""
    if "weather" not in slip.own:
        return []
    missing, days = slip.own["weather"]
    when = "yesterday" if days == 1 else f"{'all' if missing == days else missing} of the last {days} days"
    return [Sentence(f"Weather near you is missing for {when}, so we may miss a hatch.", "reader:weather")]


def _hidden(head: Head) -> Sentence:
    text = (
        f"Fewer than {head.holdings_to_hide} farms here can hide each other, "
        "so what others found can't be shown without giving one away."
    )
    return Sentence(text, "fixed:hidden")


def _around(slip: Slip, statements: Mapping[str, Statement], head: Head, book: Book) -> list[Sentence]:
    """What others found, with the effort behind it."""
    found = []
    for line in slip.around:
        first, *against = [statements[name] for name in line.statements]
        found.append(Sentence(_counts(first, line.own["found"], book), f"statement:{first.hash}"))
        found += [
            Sentence(_EFFORT[each.wording](each.figures, book.pests[each.pest].plural), f"statement:{each.hash}")
            for each in against
        ]
    unlooked = [book.pests[id].plural for id in slip.own.get("unlooked", ())]
    if unlooked:
        text = f"Nobody in the district looked for {say.listed(unlooked, 'or')} in the last 14 days."
        found.append(Sentence(text, "reader:unlooked"))
    if slip.own.get("hidden") and slip.asks:
        found.append(_hidden(head))
    return found


def _counts(statement: Statement, near: Sequence[int], book: Book) -> str:
    many, days = say.capital(book.pests[statement.pest].plural), statement.figures["days"]
    finds, looks = statement.figures["finds"], statement.figures["looks"]
    district = f"{say.of_looks(finds, looks)} in the district in the last {days} days"
    if not near[1]:
        return f"{many}: nobody looked within 20 km; {district}."
    here = f"{many}: {say.of_looks(*near[:2])} within 20 km in the last {days} days{say.yours(near[2], near[1])}"
    return f"{here}." if near[1] == looks else f"{here}; {finds:,} of {looks:,} in the whole district."


def _one_reporter(figures: Mapping[str, Any], _many: str) -> str:
    return f"Most of these reports ({figures['by_one']} of {figures['finds']} in the district) came from one person."


def _more_looking(figures: Mapping[str, Any], many: str) -> str:
    now, before = (figures["finds"], figures["looks"]), (figures["earlier_finds"], figures["earlier_looks"])
    usual = max(1, round(figures["usual_looks"]))
    more = f"There was more looking than usual ({say.how_many(now[1], 'look')} in a week, usually about {usual})"
    shares = f"in {now[0]} of {now[1]} looks, and in {before[0]} of {before[1]} before"
    if now[0] * before[1] <= before[0] * now[1]:
        return f"{more}, and {many} turned up no more often: {shares}."
    return f"{more}, which may explain some of the finds: {many} turned up {shares}."


_EFFORT = {"one_reporter": _one_reporter, "more_looking": _more_looking}


# --- the foot --------------------------------------------------------------------------------------


def _foot(cards: Sequence[Card], slip: Slip, head: Head) -> list[Sentence]:
    where = (
        f"Distances run to the middle of an area with at least {head.holdings_to_hide} farms, "
        "so that nobody's paddock is given away."
    )
    found = [Sentence(USUAL, "fixed:usual"), Sentence(HOW, "fixed:how"), Sentence(where, "fixed:where")]
    if cards:
        found += [*_weather(slip), Sentence(NOT_KNOWN, "fixed:not_known")]
    return found + [Sentence(f"Weather: {each}.", f"weather:{each}") for each in head.attributions]


def warm_half(day: date, latitude: float) -> bool:
    """Whether a day lies in the warm half of the year: October to March in the south."""
    southern_summer = day.month in (10, 11, 12, 1, 2, 3)
    return southern_summer if latitude < 0 else not southern_summer
