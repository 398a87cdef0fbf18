"""What each sort of statement says, in one sentence for a card and in a few words for a line."""

from collections.abc import Callable, Mapping
from typing import Any

from rules.slip import Sentence, Statement
from service.editions import sentences as say

ADVISER = "this is a reason to talk to your adviser, not a decision"
NOT_SETTLED = "more samples may not settle it"
BY_SPOTS = "One number can't be set against the number that matters: count again by spots."
NO_NUMBER = "There is no agreed number for this crop, stage and unit."


def told(statement: Statement, near: Any, paddock: str | None = None) -> Sentence:
    """A statement as a sentence of a card."""
    return Sentence(_SAY[statement.wording](statement.figures, near, paddock), origin(statement))


def origin(statement: Statement) -> str:
    return f"statement:{statement.hash}"


def _hatch(figures: Mapping[str, Any], _near: Any, _paddock: str | None) -> str:
    span = say.span(figures["earliest"], figures["latest"])
    return f"The weather this hatch needs has likely come ({span})."


def _count(figures: Mapping[str, Any], _near: Any, paddock: str | None) -> str:
    mean, unit = say.number(figures["mean"]), say.A_UNIT[figures["unit"]]
    ends = (figures["low"], figures["high"])
    doubt = "" if None in ends else f" (likely {say.between(*ends)})"
    return f"{paddock or 'Your count'}, {say.day(figures['day'])}: {mean} {unit}{doubt}."


def _counted_near(_figures: Mapping[str, Any], near: Any, _paddock: str | None) -> str:
    return f"Found and counted {say.near(near)}."


def _first_seen(figures: Mapping[str, Any], near: Any, _paddock: str | None) -> str:
    said = f"First this season, {say.near(near)}, from {say.how_many(figures['looks'], 'look')}"
    seasons = None if figures["earlier_than_usual"] else figures["earliest_of"]
    return f"{said}; the earliest of the {seasons} seasons we have." if seasons else f"{said}."


_SAY: Mapping[str, Callable[[Mapping[str, Any], Any, str | None], str]] = {
    "hatch": _hatch,
    "count": _count,
    "counted_near": _counted_near,
    "first_seen": _first_seen,
}


def besides(statement: Statement) -> Sentence | None:
    """What a card says of a statement besides, if there is room."""
    if statement.figures.get("earlier_than_usual"):
        return Sentence("Earlier than usual for this much looking.", origin(statement))
    return None


# --- what a count means ----------------------------------------------------------------------------


def verdict(statement: Statement, relook_days: int) -> Sentence:
    """How a reader's own count stands to the number that matters."""
    figures = statement.figures
    more = figures.get("more_spots")
    near = f"take more samples at {say.how_many(more, 'more spot')}" if more else f"{NOT_SETTLED}; {ADVISER}"
    words = {
        "at_or_above": f"At or above the number: {ADVISER}.",
        "near": f"Near the number: {near}.",
        "below": f"Below the number on that day; count again within {relook_days} days.",
        "no_agreed_number": NO_NUMBER,
        "count_by_spots": BY_SPOTS,
    }
    return Sentence(words[figures["verdict"]], origin(statement))


def against(statement: Statement) -> Sentence | None:
    """The number that a count was set against, with where it comes from."""
    figures = statement.figures
    if figures["verdict"] == "no_agreed_number":
        return None
    number = say.between(figures["threshold_low"], figures["threshold_high"])
    source = say.source(figures["mark"], figures["source"])
    return Sentence(f"{number} {say.A_UNIT[figures['unit']]} ({source}).", origin(statement))


# --- why, one tap away -----------------------------------------------------------------------------


def why(statement: Statement) -> tuple[Sentence, ...]:
    """What stands behind a statement, in a sentence or two."""
    return tuple(Sentence(text, origin(statement)) for text in _WHY[statement.wording](statement.figures))


def _why_hatch(figures: Mapping[str, Any]) -> list[str]:
    said = [
        f"Rain ({say.number(figures['rain_mm'])} mm) was followed by {figures['cool_days']} days in a row with a "
        f"mean below {say.number(figures['cool_below'])} °C, worked out for your place from weather records near it.",
        "A hatch is spread out, and comes early in patches. The dates in brackets are how wide we put it.",
    ]
    if figures["missing_days"]:
        said.append(f"{say.how_many(figures['missing_days'], 'day')} of weather are missing, which adds doubt.")
    return said


def _why_count(figures: Mapping[str, Any]) -> list[str]:
    if figures["verdict"] == "count_by_spots":
        return ["How far a count may be off shows only where spots are counted one by one."]
    said = [f"Worked out from {say.how_many(figures['spots'], 'spot')} of your own count."]
    edge, middle = figures.get("edge_mean"), figures.get("middle_mean")
    if edge is not None and middle is not None:
        unit = say.A_UNIT[figures["unit"]]
        said.append(f"At the edge {say.number(edge)} {unit}, in the middle {say.number(middle)}.")
    return said


def _why_counted_near(_figures: Mapping[str, Any]) -> list[str]:
    return ["Someone counted it there in the last two weeks. How many there were says little about your paddock."]


def _why_first_seen(figures: Mapping[str, Any]) -> list[str]:
    chance, seasons = figures["chance"], figures["past_seasons"]
    if chance is None or not seasons:
        return ["There is too little from past seasons to say how unusual this is."]
    tenths = round(10 * chance)
    share = f"about {tenths} of 10" if tenths else "fewer than 1 of 10"
    past = say.how_many(seasons, "past season")
    said = [f"In {share} usual seasons, this much looking would have shown it by then (going by {past})."]
    if figures["earliest_of"] and not figures["earlier_than_usual"]:
        said.append("The more people look, the sooner they find: the earliest need not be early.")
    return said


_WHY: Mapping[str, Callable[[Mapping[str, Any]], list[str]]] = {
    "hatch": _why_hatch,
    "count": _why_count,
    "counted_near": _why_counted_near,
    "first_seen": _why_first_seen,
}
