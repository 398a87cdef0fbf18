"""An observation file as columns of text: quickly where it is regular, record by record where it is not.

Rows are counted as a spreadsheet counts them: the header is row 1.
"""

import csv
import io
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import islice
from pathlib import Path

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.csv as arrow_csv

from rules.records import Refusal
from service import rows
from service.errors import BadInput
from service.intake.cells import REQUIRED, SPACES
from service.intake.observation import COLUMNS

_WIDTH = "has {} cells for {} columns; put quotation marks round a cell with a comma in it"
_BLOCK = 4 << 20  # bytes that are parsed together


@dataclass(frozen=True, slots=True)
class Misfit:
    """A row that has not one cell for each column."""

    number: int
    cells: list[str]
    remedy: str


@dataclass(frozen=True, slots=True)
class Sheet:
    """The columns of a file by name, each row's number, and the rows that do not fit them."""

    header: list[str]
    columns: pa.Table
    numbers: npt.NDArray[np.int64]
    misfits: list[Misfit]


def read(path: Path) -> Sheet:
    """Read a file; BadInput where it is no table of observations."""
    raw = rows.bytes_of(path)
    sheet = _regular(path, raw) or _irregular(path, rows.decoded(path, raw))
    if not sheet.misfits and not _anything(sheet.columns):
        raise BadInput(f"{path.name} has a header and no rows; add at least one")
    return sheet


def _anything(table: pa.Table) -> bool:
    """Whether some cell holds something; most files show it in their first block."""
    chunks = (chunk for column in table.columns for chunk in column.chunks)
    return any(pc.any(pc.not_equal(chunk, "")).as_py() for chunk in chunks)


def _regular(path: Path, raw: bytes) -> Sheet | None:
    """The quick way, for UTF-8 without quotation marks; None where some line is not a row."""
    first = raw[: raw.find(b"\n") + 1 or None]
    lone = b"\r" in raw and raw.count(b"\r") != raw.count(b"\r\n")
    if lone or b'"' in raw or b"\x00" in raw or not _is_utf8(first):
        return None
    header = _header(path, first.decode("utf-8-sig"))
    try:
        table = arrow_csv.read_csv(
            pa.BufferReader(raw),
            read_options=arrow_csv.ReadOptions(column_names=header, skip_rows=1, block_size=_BLOCK),
            parse_options=arrow_csv.ParseOptions(quote_char=False, ignore_empty_lines=False),
            convert_options=arrow_csv.ConvertOptions(
                column_types={name: pa.string() for name in header}, strings_can_be_null=False
            ),
        )
    except pa.ArrowInvalid:
        return None
    return Sheet(header, table, np.arange(2, table.num_rows + 2), [])


def _is_utf8(raw: bytes) -> bool:
    try:
        raw.decode()
    except UnicodeDecodeError:
        return False
    return True


def _irregular(path: Path, text: str) -> Sheet:
    """The careful way, record by record."""
    first = text if '"' in text else text[: text.find("\n") + 1 or None]  # not a copy of everything for one line
    header = _header(path, first)
    fitting: list[list[str]] = []
    numbers: list[int] = []
    misfits: list[Misfit] = []
    for number, cells in enumerate(islice(_records(path, text), 1, None), start=2):
        if len(cells) == len(header):
            fitting.append(cells)
            numbers.append(number)
        elif any(cell.strip(SPACES) for cell in cells):
            misfits.append(Misfit(number, cells, _WIDTH.format(len(cells), len(header))))
    columns = zip(*fitting, strict=True) if fitting else [()] * len(header)
    table = pa.table({name: pa.array(column, pa.string()) for name, column in zip(header, columns, strict=True)})
    return Sheet(header, table, np.array(numbers, np.int64), misfits)


def _header(path: Path, text: str) -> list[str]:
    """The names in the first record; BadInput where they are not those of a table of observations."""
    header = [cell.strip().lower() for cell in next(_records(path, text), [])]
    _check_header(path, header)
    return header


def _records(path: Path, text: str) -> Iterator[list[str]]:
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    number = 0
    try:
        for cells in reader:
            number += 1
            yield cells
    except csv.Error as error:
        raise BadInput(
            f"{path.name}, row {number + 1} (up to line {reader.line_num}): {error}. A quotation mark may be open "
            "that is never closed, or a cell too long; mend that row"
        ) from error


def _check_header(path: Path, header: Sequence[str]) -> None:
    if not any(header):
        raise BadInput(f"{path.name} is empty; its first row must name the columns, such as: {','.join(REQUIRED)}")
    if len(header) == 1 and re.search(r"[;\t]", header[0]):
        raise BadInput(f"{path.name} is not separated by commas; save it as comma-separated CSV")
    faults = list(_header_faults(header))
    if faults:
        raise BadInput(rows.in_words(path, faults), faults)


def _header_faults(header: Sequence[str]) -> Iterator[Refusal]:
    for name in dict.fromkeys(header):
        if name not in COLUMNS:
            yield Refusal(1, name, name, f"there is no such column{rows.nearest(name, COLUMNS)}")
        if header.count(name) > 1:
            yield Refusal(1, name, name, "this column is there twice; keep one")
    for name in REQUIRED:
        if name not in header:
            yield Refusal(1, name, "", "this column is missing; add it")
    if not {"latitude", "longitude"} <= set(header) and not {"paddock", "postcode"} & set(header):
        yield Refusal(1, "latitude", "", "add the columns latitude and longitude, or paddock, or postcode")
