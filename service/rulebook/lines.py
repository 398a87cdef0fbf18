"""What is wrong in a catalogue file, in words: file, line, entry, and what to do about it."""

import re
from collections.abc import Sequence

from pydantic import ValidationError

from rules.records import Refusal
from service.errors import BadInput

_REMEDIES = {
    "missing": "add it; every value needs its mark (S, C, M or calc) and its source",
    "extra_forbidden": "there is no such key; remove it, or check its spelling",
    "string_too_short": "it is empty; fill it in",
    "too_short": "it is empty; name one at least",
}


def refusals(error: ValidationError, text: str, within: Sequence[str | int] = ()) -> list[Refusal]:
    """One refusal for each thing that is wrong, with the line where it stands or belongs."""
    found = []
    for problem in error.errors():
        entry = (*within, *problem["loc"])
        remedy = _REMEDIES.get(problem["type"]) or problem["msg"].removeprefix("Value error, ")
        value = "" if problem["type"] == "missing" else str(problem["input"])[:80]
        found.append(Refusal(line_of(text, entry), name(entry), value, remedy))
    return found


def refuse(file: str, found: Sequence[Refusal]) -> BadInput:
    """The error that says all of them."""
    lines = [f"{file} line {each.row}: {each.field}: {each.remedy}" + _given(each.value) for each in found]
    return BadInput("the catalogue can't be used; the running rules stay as they are\n  " + "\n  ".join(lines), found)


def name(entry: Sequence[str | int]) -> str:
    """An entry as people count: thresholds 2, mark."""
    words = ""
    for part in entry:
        words += f" {part + 1}" if isinstance(part, int) else f"{', ' if words else ''}{part}"
    return words or "the file"


def line_of(text: str, entry: Sequence[str | int]) -> int:
    """The line of an entry, or of the nearest table around it that the file has; 1 if none."""
    lines = text.splitlines()
    at, header = 0, ""
    for part, following in zip(entry, [*entry[1:], None], strict=True):
        if isinstance(part, int):
            continue
        header = f"{header}.{part}" if header else str(part)
        nth = following if isinstance(following, int) else 0
        found = _find(lines, rf"\[+{re.escape(header)}\]+", at, nth)
        if found is None:
            found = _find(lines, rf"{re.escape(str(part))}\s*=.*", at + (at > 0), 0)
        if found is None:
            break
        at = found
    return at + 1


def _find(lines: Sequence[str], pattern: str, start: int, nth: int) -> int | None:
    matches = [i for i in range(start, len(lines)) if re.fullmatch(pattern, lines[i].strip())]
    return matches[nth] if nth < len(matches) else None


def _given(value: str) -> str:
    return f" (given: {value})" if value else ""
