"""One cell of an observation file at a time: what each column holds, and what to do about a cell that doesn't.

`read` gives the value of a cell, None for an empty one; ValueError says what to do in words for a person.
Every check of a single cell is here, for one row and for a million: `masks` calls it once for each
different text in a column.
"""

import re
from collections.abc import Callable
from datetime import UTC, date, datetime
from typing import Any, get_args

from rules.records import Why
from service import rows
from service.intake.frame import Frame
from service.rulebook.models import Unit

SPACES = " \t\n\v\f\r"
NUMBER = r"-?\d+(\.\d+)?"
WHOLE_NUMBER = r"\d+(\.0+)?"
LONGEST_ID = 100  # characters
FEW = 200  # more ids than this are not searched for the nearest one
OLDEST = date(1950, 1, 1)  # the oldest day that is not taken for a slip of the pen

# The lowest and the highest number that each column can hold; beyond them it is a slip of the pen.
BOUNDS = {
    "latitude": (-90.0, 90.0),
    "longitude": (-180.0, 180.0),
    "uncertainty_m": (0.0, 200_000.0),
    "count": (0.0, 1_000_000.0),
    "plants_per_m2": (0.0, 10_000.0),
    "row_spacing_m": (0.0, 5.0),
}
WHOLE = {"stage": (0, 99), "units_sampled": (1, 100_000), "units_per_spot": (1, 100_000), "nights": (1, 366)}
CHOICES = {
    "status": ("present", "absent"),
    "confidence": ("sure", "fairly sure", "unsure"),
    "why": tuple(reason.value for reason in Why),
    "unit": get_args(Unit),
}
SCALES = {"bbch": "BBCH", "zadoks": "Zadoks"}
DAYS = ("day", "serviced_on", "treated_on")
PLAIN = ("record_id", "trap", "lure")  # short texts
PROSE = ("method", "damage", "beneficials", "note")  # texts in which a < may mean "fewer than"
REQUIRED = ("day", "pest", "status", "reporter")


def read(name: str, text: str, frame: Frame) -> Any:
    """The value of one cell."""
    value = text.strip(SPACES)
    if not value:
        if name in REQUIRED:
            raise ValueError("is empty; fill it in")
        return None
    reader = _READERS.get(name)
    return reader(value, frame) if reader else _by_table(name, value)


def _by_table(name: str, value: str) -> Any:
    if name in BOUNDS:
        return number(value, *BOUNDS[name])
    if name in WHOLE:
        return int(number(value, *WHOLE[name], whole=True))
    if name in CHOICES:
        return choice(value, CHOICES[name])
    if name in DAYS:
        return day(value)
    return prose(value) if name in PROSE else plain(value)


# --- kinds of cells ----------------------------------------------------------------------------


def number(value: str, low: float, high: float, *, whole: bool = False) -> float:
    """A plain number between two bounds, both allowed."""
    if re.fullmatch(WHOLE_NUMBER if whole else NUMBER, value, re.ASCII) and low <= float(value) <= high:
        return float(value)
    kind = "a whole number" if whole else "a number"
    hint = f"; with a point: {value.replace(',', '.')}" if re.fullmatch(r"[+-]?\d+,\d+", value, re.ASCII) else ""
    raise ValueError(f"write {kind} from {low:g} to {high:g}, in digits{hint}")


def choice(value: str, choices: tuple[str, ...]) -> str:
    if value.lower() in choices:
        return value.lower()
    raise ValueError(f"write one of: {', '.join(choices)}{rows.nearest(value, choices)}")


def day(value: str) -> date:
    """A day of the calendar as YYYY-MM-DD; what could be two different days is not guessed at."""
    found = re.fullmatch(r"(\d{4})-(\d{2})-(\d{2})", value, re.ASCII)
    if found is None:
        raise ValueError(_two_days(value) or "write the day as YYYY-MM-DD, such as 2026-05-04")
    try:
        parsed = date(*map(int, found.groups()))
    except ValueError:
        raise ValueError("there is no such day in the calendar; check year, month and day") from None
    if parsed < OLDEST:
        raise ValueError(f"lies before {OLDEST.year}; check the year")
    return parsed


def _two_days(value: str) -> str | None:
    found = re.fullmatch(r"(\d{1,2})[/.-](\d{1,2})[/.-](\d{4})", value, re.ASCII)
    if found is None:
        return None
    first, second, year = map(int, found.groups())
    readings = {
        f"{year}-{month:02d}-{the_day:02d}"
        for the_day, month in ((first, second), (second, first))
        if 1 <= month <= 12 and 1 <= the_day <= 31
    }
    return f"write it as {' or '.join(sorted(readings))}, whichever is meant" if readings else None


def moment(value: str, frame: Frame) -> datetime:
    try:
        found = datetime.fromisoformat(value)
    except ValueError:
        found = None
    if found is None or found.tzinfo is None:
        raise ValueError("write the time with its offset, such as 2026-05-04T09:30+09:30 or 2026-05-04T00:00Z")
    if found > frame.now:
        raise ValueError("lies in the future; check the date, the time and the offset")
    if found.date() < OLDEST:
        raise ValueError(f"lies before {OLDEST.year}; check the year")
    return found.astimezone(UTC)


def plain(value: str) -> str:
    if len(value) > LONGEST_ID:
        raise ValueError(f"shorten it to {LONGEST_ID} characters")
    fault = rows.unsafe(value)
    if fault:
        raise ValueError(fault)
    return value


def prose(value: str) -> str:
    """Words of the reporter's own, in which a < may stand before a number."""
    if re.search(r"<[A-Za-z/!?]", value):
        raise ValueError("markup is not taken; take the < and > away")
    fault = rows.unsafe(value.replace("<", " ").replace(">", " "))
    if fault:
        raise ValueError(fault)
    return value


# --- cells that refer to something -------------------------------------------------------------


def _named(what: str, names: str) -> Callable[[str, Frame], str]:
    def read_name(value: str, frame: Frame) -> str:
        known = getattr(frame.names, names)
        found = known.get(" ".join(value.lower().split()))
        if found is not None:
            return str(found)
        choices = sorted(set(known.values()))
        raise ValueError(
            f"there is no {what} of that name (there is: {', '.join(choices)}){rows.nearest(value, list(known))}"
        )

    return read_name


def _referred(what: str, known: str, file: str) -> Callable[[str, Frame], str]:
    def read_id(value: str, frame: Frame) -> str:
        if not frame.districts:
            return plain(value)
        there = getattr(frame, known)
        if value in there:
            return value
        hint = rows.nearest(value, list(there)) if len(there) <= FEW else ""
        raise ValueError(f"there is no {what} of that id; take {file} first, or mend it{hint}")

    return read_id


def _source(value: str, frame: Frame) -> str:
    if rows.ID.fullmatch(value):
        return value
    raise ValueError("write at most 64 letters, digits, points, hyphens and underscores")


def _stage_scale(value: str, frame: Frame) -> str:
    return SCALES[choice(value, tuple(SCALES))]


def _spot_counts(value: str, frame: Frame) -> tuple[float, ...]:
    return tuple(number(part.strip(SPACES), *BOUNDS["count"]) for part in value.split(";"))


def _spot_at(value: str, frame: Frame) -> tuple[str, ...]:
    return tuple(choice(part.strip(SPACES), ("edge", "middle")) for part in value.split(";"))


def _treated_group(value: str, frame: Frame) -> str:
    if re.fullmatch(r"\d{1,2}[A-Da-d]?|UN|un|none", value, re.ASCII):
        return value if value == "none" else value.upper()
    raise ValueError("write the mode-of-action group from the label, such as 3A, and no product")


_READERS: dict[str, Callable[[str, Frame], Any]] = {
    "pest": _named("pest", "pests"),
    "crop": _named("crop", "crops"),
    "district": _referred("district", "districts", "the district file"),
    "paddock": _referred("paddock", "paddocks", "the paddocks"),
    "postcode": _referred("postcode", "postcodes", "the postcodes"),
    "reporter": _referred("person", "people", "the people"),
    "source": _source,
    "stage_scale": _stage_scale,
    "spot_counts": _spot_counts,
    "spot_at": _spot_at,
    "treated_group": _treated_group,
    "arrived_at": moment,
}
COLUMNS = (*BOUNDS, *WHOLE, *CHOICES, *DAYS, *PLAIN, *PROSE, *_READERS)
