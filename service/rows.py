"""Rows of a text table, read the same way for every file: what can't be used is named by row, field and remedy.

Files are UTF-8, with or without its mark, or UTF-16 with its mark, comma-separated, with a header. Rows
are counted as a spreadsheet counts them: the header is row 1. Cells that a spreadsheet would run, that
hold markup, or that could break a mail header or a line of a page are refused, not repaired.
"""

import codecs
import csv
import io
import math
import re
import unicodedata
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from datetime import date, datetime
from difflib import get_close_matches
from pathlib import Path

from rules.records import Refusal
from service.errors import BadInput

_LONGEST_HEADER = 65_536  # bytes in which the first line is looked for by itself
LONGEST = 500  # characters in one cell; a name or note of this kind is never longer
ID = re.compile(r"[A-Za-z0-9][A-Za-z0-9._-]{0,63}")
EMAIL = re.compile(
    r"(?=.{3,254}\Z)[A-Za-z0-9](?:[A-Za-z0-9._%+'-]{0,62}[A-Za-z0-9_+-])?"
    r"@(?:[A-Za-z0-9](?:[A-Za-z0-9-]{0,61}[A-Za-z0-9])?\.)+[A-Za-z]{2,63}"
)
RUN_BY_SPREADSHEETS = "=+-@＝＋－＠"  # the wide ones by spreadsheets set up for East Asia
TURNS_TEXT = set("\u202a\u202b\u202c\u202d\u202e\u2066\u2067\u2068\u2069")  # hide what a line really says


@dataclass(slots=True)
class Row:
    """One row, and what was refused of it. Each reader returns None where the cell is empty or refused."""

    number: int
    cells: dict[str, str]
    refusals: list[Refusal] = field(default_factory=list)

    def refuse(self, name: str, remedy: str) -> None:
        self.refusals.append(Refusal(self.number, name, self.cells.get(name, ""), remedy))

    def given(self, name: str, *, needed: bool = False) -> str:
        """What stands in the cell, without spaces around it; empty cells that must be filled are refused."""
        value = self.cells.get(name, "").strip()
        if not value and needed:
            self.refuse(name, "is empty; fill it in")
        return value

    def text(self, name: str, *, needed: bool = False) -> str | None:
        """A cell of plain words."""
        value = self.given(name, needed=needed)
        if not value:
            return None
        fault = unsafe(value)
        if fault:
            self.refuse(name, fault)
            return None
        return value

    def id(self, name: str, *, needed: bool = False) -> str | None:
        """An id: it appears in links and file names, so it is short and plain."""
        value = self.text(name, needed=needed)
        if value is None or ID.fullmatch(value):
            return value
        self.refuse(name, "write an id of at most 64 letters, digits, points, hyphens and underscores")
        return None

    def number_in(self, name: str, low: float, high: float, *, needed: bool = False) -> float | None:
        """A number between two bounds, both allowed."""
        value = self.given(name, needed=needed)
        if not value:
            return None
        try:
            number = float(value)
        except ValueError:
            number = math.nan
        if "_" not in value and low <= number <= high:
            return number
        self.refuse(name, f"write a number from {low:g} to {high:g}, with a point, or leave it empty")
        return None

    def whole(self, name: str, low: int, high: int, *, needed: bool = False) -> int | None:
        """A whole number between two bounds, both allowed."""
        value = self.number_in(name, low, high, needed=needed)
        if value is None or value == int(value):
            return None if value is None else int(value)
        self.refuse(name, f"write a whole number from {low} to {high}")
        return None

    def day(self, name: str, *, needed: bool = False) -> date | None:
        """A day of the calendar as YYYY-MM-DD."""
        value = self.given(name, needed=needed)
        if not value:
            return None
        try:
            return _iso_day(value)
        except ValueError:
            self.refuse(name, "write the day as YYYY-MM-DD, such as 2026-05-04")
            return None

    def moment(self, name: str) -> datetime | None:
        """A time with its offset from UTC, such as 2026-05-04T09:30+09:30."""
        value = self.given(name)
        if not value:
            return None
        try:
            found = datetime.fromisoformat(value)
        except ValueError:
            found = None
        if found is not None and found.tzinfo is not None:
            return found
        self.refuse(name, "write the time with its offset, such as 2026-05-04T09:30+09:30 or 2026-05-04T00:00Z")
        return None

    def yes_no(self, name: str) -> bool | None:
        value = self.choice(name, ("yes", "no"))
        return None if value is None else value == "yes"

    def choice(self, name: str, choices: Sequence[str], *, needed: bool = False) -> str | None:
        """One of some words."""
        value = self.text(name, needed=needed)
        if value is None or value.lower() in choices:
            return value and value.lower()
        self.refuse(name, f"write one of: {', '.join(choices)}{nearest(value, choices)}")
        return None

    def several(self, name: str) -> tuple[str, ...]:
        """The parts of a cell that holds a list separated by semicolons, each once."""
        value = self.text(name)
        return tuple(dict.fromkeys(part.strip() for part in (value or "").split(";") if part.strip()))

    def email(self, name: str, *, needed: bool = False) -> str | None:
        """One e-mail address and nothing else; a line break or a second address is no part of it."""
        value = self.text(name, needed=needed)
        if value is None or (EMAIL.fullmatch(value) and ".." not in value):
            return value
        self.refuse(name, "write one e-mail address, such as name@example.org")
        return None


def unsafe(value: str) -> str | None:
    """Why a text can't be taken, with the remedy; None if it can."""
    if len(value) > LONGEST:
        return f"shorten it to {LONGEST} characters"
    if value[0] in RUN_BY_SPREADSHEETS:
        return f"a spreadsheet would run this as a formula; take the {value[0]} at its start away"
    if "<" in value or ">" in value:
        return "markup is not taken; take the < and > away"
    if any(unicodedata.category(sign) in ("Cc", "Zl", "Zp", "Cs") or sign in TURNS_TEXT for sign in value):
        return "holds a line break or an invisible sign; write it on one line of plain text"
    return None


def nearest(value: str, known: Iterable[str]) -> str:
    """A hint for a misspelt word: " (did you mean …?)", or nothing."""
    spelt = {word.lower(): word for word in known}
    close = get_close_matches(value.lower(), spelt, n=1, cutoff=0.6)
    return f" (did you mean {spelt[close[0]]}?)" if close else ""


def _iso_day(value: str) -> date:
    if not re.fullmatch(r"\d{4}-\d{2}-\d{2}", value, re.ASCII):
        raise ValueError(value)
    return date.fromisoformat(value)


# --- the file ----------------------------------------------------------------------------------


def text_of(path: Path) -> str:
    """The text of a file, whichever of the encodings above it is in."""
    return decoded(path, bytes_of(path))


def bytes_of(path: Path) -> bytes:
    """A file as it is."""
    try:
        return path.read_bytes()
    except OSError as error:
        raise BadInput(f"{path} can't be read: {error.strerror}. Check its name and that you may read it") from error


def decoded(path: Path, raw: bytes) -> str:
    """What a file's bytes say; BadInput where they are no text."""
    wide = raw.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE))
    try:
        text = raw.decode("utf-16" if wide else "utf-8-sig")
    except UnicodeDecodeError as error:
        row = raw[: error.start].count(b"\n") + 1
        raise BadInput(
            f"{path.name}, line {row}: not UTF-8 text. Save the file as 'CSV UTF-8' and try again"
        ) from error
    if "\x00" in text:
        raise BadInput(f"{path.name} holds zero bytes. Save the file as 'CSV UTF-8' and try again")
    return text


def header_of(path: Path) -> list[str]:
    """The column names of a table, in lower case and without spaces around them."""
    text = _plain_first_line(path) or text_of(path)
    return _names(next(_records(path, text), []))


def _plain_first_line(path: Path) -> str | None:
    """The first line of a file, without reading the rest, if it is ASCII and surely the whole first record."""
    if not path.is_file():
        return None
    with path.open("rb") as file:
        line = file.readline(_LONGEST_HEADER)
    plain = line.isascii() and line.endswith(b"\n") and not re.search(rb'["\x00]|\r(?!\n\Z)', line)
    return line.decode() if plain else None


def read(path: Path, required: Sequence[str], optional: Sequence[str] = ()) -> list[Row]:
    """The rows of a table; BadInput for a header that does not fit. Rows with a wrong length carry a refusal."""
    records = _records(path, text_of(path))
    header = _names(next(records, []))
    _check_header(path, header, required, optional)
    rows = [
        _row(number, header, cells)
        for number, cells in enumerate(records, start=2)
        if any(cell.strip() for cell in cells)
    ]
    if not rows:
        raise BadInput(f"{path.name} has a header and no rows; add at least one")
    return rows


def finish(path: Path, rows: Sequence[Row]) -> None:
    """All or nothing: BadInput with every refusal, if there is one."""
    refusals = [refusal for row in rows for refusal in row.refusals]
    if refusals:
        raise BadInput(in_words(path, refusals), refusals)


def in_words(path: Path, refusals: Sequence[Refusal]) -> str:
    """A summary that leads to the first thing to mend."""
    first = refusals[0]
    return (
        f"nothing was taken from {path.name}: {len(refusals)} to mend. "
        f"First: row {first.row}, {first.field} {first.value!r}: {first.remedy}"
    )


def once(rows: Sequence[Row], key: Callable[[Row], object], name: str) -> None:
    """Refuse each row whose key an earlier row has; rows that are refused already are left aside."""
    seen: dict[object, int] = {}
    for row in [row for row in rows if not row.refusals]:
        first = seen.setdefault(key(row), row.number)
        if first != row.number:
            row.refuse(name, f"row {first} is the same one; keep one of the two")


def _records(path: Path, text: str) -> Iterator[list[str]]:
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    try:
        yield from reader
    except csv.Error as error:
        raise BadInput(
            f"{path.name}, line {reader.line_num}: {error}. Check the quotation marks up to that line"
        ) from error


def _names(cells: Sequence[str]) -> list[str]:
    return [cell.strip().lower() for cell in cells]


def _check_header(path: Path, header: Sequence[str], required: Sequence[str], optional: Sequence[str]) -> None:
    known = [*required, *optional]
    if len(header) == 1 and re.search(r"[;\t]", header[0]):
        raise BadInput(f"{path.name} is not separated by commas; save it as comma-separated CSV")
    faults = [
        Refusal(1, name, name, f"there is no such column{nearest(name, known)}")
        for name in header
        if name and name not in known
    ]
    faults += [
        Refusal(1, name, name, "this column is there twice; keep one")
        for name in dict.fromkeys(header)
        if name and header.count(name) > 1
    ]
    faults += [Refusal(1, name, "", "this column is missing; add it") for name in required if name not in header]
    if faults:
        raise BadInput(in_words(path, faults), faults)


def _row(number: int, header: Sequence[str], cells: Sequence[str]) -> Row:
    row = Row(number, {name: cell for name, cell in zip(header, cells, strict=False) if name})
    nameless = [cell for name, cell in zip(header, cells, strict=False) if not name and cell.strip()]
    if len(cells) != len(header) or nameless:
        row.refusals.append(
            Refusal(
                number,
                "(row)",
                ",".join(cells)[:80],
                f"has {len(cells)} cells for {len(header)} columns; put quotation marks round a cell with a comma in it"
                if not nameless
                else "has a cell in a column without a name; name the column or empty the cell",
            )
        )
    return row
