"""Rows that name a notifiable pest: found before anything else looks at them, and kept apart from then on.

A row matches if any of its cells, or the name of its file, holds one of the names on its district's list;
case, accents, and what stands between the words do not matter. A row whose district can't be told is held
against every list.
"""

import re
import unicodedata
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from rules.digests import digest
from service.intake import cells
from service.intake.consistency import Mask
from service.intake.frame import Frame
from service.intake.sheet import Sheet
from service.intake.where import district_of
from service.store.reportables import Case

TELL_FIRST = (
    "Please ring {hotline_name} now: {hotline}.\n"
    "This does not report it for you; you may have a legal duty to ring now. Leave it where it is. Don't move "
    "plants, soil or samples. Limit people and machines there. Don't post it."
)


def fold(text: str) -> str:
    """A text without case, accents and invisible signs."""
    apart = unicodedata.normalize("NFKD", text)
    return "".join(sign for sign in apart if unicodedata.category(sign) not in ("Mn", "Cf")).casefold()


def _pattern(names: Iterable[str]) -> str | None:
    """One pattern for all names, as whole words, in one or many; for folded text."""
    words = [re.findall(r"[^\W_]+", fold(name)) for name in names]
    forms = sorted({r"[^a-z0-9]*".join(map(re.escape, parts)) for parts in words if parts})
    return f"(?:^|[^a-z0-9])(?:{'|'.join(forms)})(?:e?s)?(?:$|[^a-z0-9])" if forms else None


@dataclass(frozen=True, slots=True)
class Lists:
    """The lists of all districts, ready to match; `any` matches what some list holds."""

    patterns: Mapping[str, str]
    any: str | None

    @classmethod
    def of(cls, frame: Frame) -> "Lists":
        names = {
            id: [name for entry in district.reportables for name in entry.names]
            for id, district in frame.districts.items()
        }
        patterns = {id: pattern for id, theirs in names.items() if (pattern := _pattern(theirs))}
        return cls(patterns, _pattern([name for theirs in names.values() for name in theirs]))

    def listed_in(self, text: str, district: str | None) -> str | None:
        """The district on whose list a text stands: the given one, or the first of all if none is."""
        folded = fold(text)
        for id, pattern in self.patterns.items():
            if district in (None, id) and re.search(pattern, folded):
                return id
        return None


# --- rows of a sheet ---------------------------------------------------------------------------


def cases_in(sheet: Sheet, path: Path, frame: Frame) -> tuple[Mask, set[int], list[Case]]:
    """The matching rows of a sheet: a mask over its columns, numbers of its misfits, and their cases."""
    lists = Lists.of(frame)
    matching = np.zeros(len(sheet.numbers), bool)
    cases = []
    for at in np.flatnonzero(_suspects(sheet, path, lists)).tolist():
        row = {name: sheet.columns[name][at].as_py() for name in sheet.header}
        case = _case(row, path, lists, frame)
        if case is not None:
            matching[at] = True
            cases.append(case)
    odd: set[int] = set()
    for misfit in sheet.misfits:
        case = _case({f"cell {at}": cell for at, cell in enumerate(misfit.cells, 1)}, path, lists, frame)
        if case is not None:
            odd.add(misfit.number)
            cases.append(case)
    return matching, odd, cases


def cases_in_text(text: str, path: Path, frame: Frame) -> list[Case]:
    """The cases in a file that can't be read as a table: each line that matches."""
    lists = Lists.of(frame)
    if lists.any is None:
        return []
    named = lists.listed_in(path.stem, frame.default_district) is not None
    lines = [line for line in text.splitlines() if named or re.search(lists.any, fold(line))]
    found = (_case({"line": line}, path, lists, frame) for line in lines if line.strip())
    return [case for case in found if case is not None]


def showable(text: str, instead: str, frame: Frame) -> str:
    """A text for a message; one that holds a name on some list is replaced."""
    pattern = Lists.of(frame).any
    return instead if pattern is not None and re.search(pattern, fold(text)) else text


def tell_first(cases: Sequence[Case], frame: Frame) -> str | None:
    """What the reporter must read before anything else; None where there is no case."""
    districts = dict.fromkeys(case.district for case in cases)
    told = dict.fromkeys(
        TELL_FIRST.format(hotline_name=frame.districts[id].hotline_name, hotline=frame.districts[id].hotline)
        for id in districts
    )
    return "\n\n".join(told) or None


def _suspects(sheet: Sheet, path: Path, lists: Lists) -> Mask:
    """Rows that hold a name on any list, or all rows if the file's name does."""
    size = len(sheet.numbers)
    if lists.any is None or re.search(lists.any, fold(path.stem)):
        return np.full(size, lists.any is not None)
    found = np.zeros(size, bool)
    for name in sheet.header:
        start = 0
        for chunk in sheet.columns[name].chunks:
            found[start : start + len(chunk)] |= _holding(chunk, name, lists.any)
            start += len(chunk)
    return found


def _holding(column: pa.Array, name: str, pattern: str) -> Mask:
    """Which cells of a column match; numbers are told apart first, and each different word is read once."""
    found = np.zeros(len(column), bool)
    if name in cells.BOUNDS:
        wordy = np.flatnonzero(~pc.match_substring_regex(column, r"^[-+0-9., ]*$").to_numpy(zero_copy_only=False))
        found[wordy] = [re.search(pattern, fold(text)) is not None for text in column.take(wordy).to_pylist()]
        return found
    if name not in (*cells.PLAIN, *cells.PROSE):
        coded = column.dictionary_encode()
        hits = [re.search(pattern, fold(text)) is not None for text in coded.dictionary.to_pylist()]
        found[:] = np.array(hits, bool)[coded.indices.to_numpy()]
        return found
    found[:] = pc.match_substring_regex(column, pattern, ignore_case=True).to_numpy(zero_copy_only=False)
    accented = np.flatnonzero(~pc.string_is_ascii(column).to_numpy(zero_copy_only=False))
    found[accented] = [re.search(pattern, fold(text)) is not None for text in column.take(accented).to_pylist()]
    return found


def _case(row: dict[str, str], path: Path, lists: Lists, frame: Frame) -> Case | None:
    given = {name: cell for name, cell in row.items() if cell.strip()}
    text = " \n ".join([*given.values(), path.stem])
    district = lists.listed_in(text, _district(row, frame))
    if district is None:
        return None
    return Case(f"R-{digest([district, given])[:12].upper()}", district, frame.now, given, row.get("reporter") or None)


def _district(row: Mapping[str, str], frame: Frame) -> str | None:
    """The district of a row that may be malformed; None if that can't be told."""
    known = {"paddock": frame.paddocks, "postcode": frame.postcodes, "district": frame.districts}
    told = {name: (row.get(name) or "").strip(cells.SPACES) for name in known}
    if any(value and value not in known[name] for name, value in told.items()):
        return None
    district, misplaced = district_of(frame, *(told[name] or None for name in known))
    return None if misplaced else district
