"""What could not be taken: told row by row, and kept in a file that can be mended and taken again."""

import csv
import io
import json
import os
from collections.abc import Mapping, Sequence
from dataclasses import asdict
from pathlib import Path

from rules.records import Refusal
from service import rows
from service.errors import BadInput


class RowsRefused(BadInput):
    """A file was not taken. `to_the_hotline` is what the reporter must read first, if there is something."""

    def __init__(self, message: str, refusals: Sequence[Refusal] = (), to_the_hotline: str | None = None) -> None:
        super().__init__(f"{to_the_hotline}\n\n{message}" if to_the_hotline else message, refusals)
        self.to_the_hotline = to_the_hotline


def summary(name: str, refusals: Sequence[Refusal]) -> str:
    """A refusal of the whole file that leads to the first thing to mend."""
    return rows.in_words(Path(name), refusals) + ". To take the good rows alone: --keep-good FILE"


def reasons_path(path: Path) -> Path:
    """Where the reasons for a file of refused rows are."""
    return path.with_name(path.name + ".reasons.json")


def keep(path: Path, header: Sequence[str], refused: Mapping[int, Sequence[str]], refusals: Sequence[Refusal]) -> None:
    """Write refused rows, by number, under the header they came with, and their reasons beside them.

    A text that a spreadsheet would run stands behind an apostrophe, and can't run.
    """
    out = io.StringIO(newline="")
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(header)
    for number in sorted(refused):
        writer.writerow([_harmless(cell) for cell in refused[number]])
    at = {number: place for place, number in enumerate(sorted(refused), start=2)}
    reasons = [{"row_here": at[refusal.row]} | asdict(refusal) for refusal in refusals]
    if path.exists() and path.read_bytes() != out.getvalue().encode():
        raise BadInput(f"{path} is there already, and was perhaps mended; take it, move it away, or name another")
    _write(path, out.getvalue())
    _write(reasons_path(path), json.dumps(reasons, ensure_ascii=False, indent=1) + "\n")


def check_target(path: Path, source: Path) -> None:
    """Refuse to write over the file that is read."""
    if path.resolve() == source.resolve():
        raise BadInput(f"{path} is the file to take; give the refused rows another name")


def _harmless(cell: str) -> str:
    bare = cell.lstrip()
    if bare[:1] in rows.RUN_BY_SPREADSHEETS and bare and not _is_number(bare):
        return "'" + cell
    return cell


def _is_number(cell: str) -> bool:
    return cell.lstrip("+-").replace(".", "", 1).replace(",", "", 1).isdecimal()


def _write(path: Path, text: str) -> None:
    """All of a file or nothing of it, on the disk before this returns."""
    partial = path.with_name(path.name + ".partial")
    with partial.open("w", encoding="utf-8", newline="") as file:
        file.write(text)
        file.flush()
        os.fsync(file.fileno())
    partial.replace(path)
