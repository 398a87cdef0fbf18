"""The small words that readers' sentences are made of: days, numbers, nearness, stages, units, sources."""

import re
from collections.abc import Sequence
from dataclasses import replace
from datetime import date
from typing import Any

from rules.book import LIVE_MARKS, Book, Pest, Threshold

WEEKDAYS = ("Mon", "Tue", "Wed", "Thu", "Fri", "Sat", "Sun")
MONTHS = ("Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec")
NUMBERS = ("no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten")

A_UNIT = {  # as in "10 a plant"
    "per_plant": "a plant",
    "per_100cm2": "in 10 × 10 cm",
    "per_m2": "a square metre",
    "per_metre_row": "a metre of row",
    "per_half_metre_row": "a half metre",
    "holes_per_leaf": "holes a leaf",
    "per_10_sweeps": "in 10 sweeps",
    "per_trap_night": "a trap a night",
    "per_refuge": "under each tile",
    "percent_plants": "plants in 100",
}
COUNTED = {  # what is counted at a spot: one, many
    "per_plant": ("a plant", "plants"),
    "per_100cm2": ("10 × 10 cm", "squares of 10 × 10 cm"),
    "per_m2": ("a square", "squares"),
    "per_metre_row": ("a metre of row", "metres of row"),
    "per_half_metre_row": ("half a metre", "half metres"),
    "holes_per_leaf": ("a leaf", "leaves"),
    "per_10_sweeps": ("10 sweeps", "sets of 10 sweeps"),
    "per_trap_night": ("a trap", "traps"),
    "per_refuge": ("a tile", "tiles"),
    "percent_plants": ("a plant", "plants"),
}
_DOI = re.compile(r"doi (10\.\S+?)[;,.]?(?:\s|$)")


def day(value: date | str) -> str:
    """A day as people say it: Tue 12 May."""
    on = date.fromisoformat(value) if isinstance(value, str) else value
    return f"{WEEKDAYS[on.weekday()]} {on.day} {MONTHS[on.month - 1]}"


def span(first: str, last: str) -> str:
    """A span of days, without weekdays: 28 Apr–26 May."""
    return "–".join(day(each).split(" ", 1)[1] for each in (first, last))


def number(value: float) -> str:
    """A count without needless digits."""
    rounded = round(value, 1)
    return str(int(rounded)) if rounded == int(rounded) else str(rounded)


def between(low: float, high: float) -> str:
    """A range, or the one number where both ends are equal."""
    return number(low) if number(low) == number(high) else f"{number(low)}–{number(high)}"


def in_words(n: int) -> str:
    """A small whole number in words."""
    return NUMBERS[n] if 0 <= n < len(NUMBERS) else str(n)


def how_many(n: int, one: str, many: str | None = None) -> str:
    """Such as *1 look* and *3 looks*."""
    return f"{n:,} {one if n == 1 else many or one + 's'}"


def of_looks(finds: int, looks: int) -> str:
    """Finds with the effort behind them, such as *found in 4 of 11 looks*."""
    if looks == 1:
        return "found in the one look" if finds else "not found in the one look"
    return f"found in {finds:,} of {looks:,} looks"


def yours(own: int, looks: int) -> str:
    """How many of some looks are the reader's own, to stand behind a count: *, 2 looks yours*."""
    if not own:
        return ""
    return ", your own" if own == looks else f", {how_many(own, 'look')} yours"


def listed(words: Sequence[str], joint: str = "and") -> str:
    """Such as *a, b and c*."""
    return f" {joint} ".join(filter(None, [", ".join(words[:-1]), words[-1]]))


def capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def crop(book: Book, id: str) -> str:
    return book.crops[id].name if id in book.crops else id.replace("_", " ")


def stage(book: Book, crop_id: str, code: int | None) -> str | None:
    """A stage in the words that readers know it by."""
    if code is None or crop_id not in book.crops:
        return None
    return next((words for first, words in reversed(book.crops[crop_id].stages) if first <= code), None)


def near(value: Any) -> str:
    """Where something is, from a band's end [km], a direction and the doubt of the public cell [km]."""
    if value == "own":
        return "on your own place"
    if value is None:
        return "in your district"
    band, direction, doubt = value
    if direction is None:
        return f"within {-5 * (-(band + doubt) // 5) if doubt > 1 else band} km"
    bands = {5: "within 5 km to the", 10: "5–10 km", 20: "10–20 km"}
    about = "about " if doubt >= 10 else ""
    return f"{about}{bands[band]} {direction}"


def source(mark: str, words: str) -> str:
    """Where a number comes from, in a few words."""
    if mark == "C":
        return "common practice"
    if mark == "calc":
        return "worked out by us"
    return "a published study" if "doi" in words else "a published guide"


def reference(mark: str, words: str) -> str:
    """Where a number comes from, to look it up: by its number, since titles may hold words we don't send."""
    found = _DOI.search(words)
    return f"{source(mark, words)}, doi {found[1]}" if found else source(mark, words)


def threshold(pest: Pest, crop_id: str, code: int | None) -> Threshold | None:
    """The number that matters in the pest's own unit. Without a stage, one number must hold at all that have one."""
    usable = [
        each for each in pest.thresholds if each.crop == crop_id and each.unit == pest.unit and each.mark in LIVE_MARKS
    ]
    if code is not None:
        return next((each for each in usable if each.stage_from <= code <= each.stage_to), None)
    if len({(each.low, each.high) for each in usable}) != 1:
        return None
    least = min(usable, key=lambda each: each.mark)  # C before S: the weaker mark speaks for all
    first, last = min(each.stage_from for each in usable), max(each.stage_to for each in usable)
    return replace(least, stage_from=first, stage_to=last)
