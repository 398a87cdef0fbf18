"""Check a sheet and build the store's rows of it; a large one in two processes, a half each.

Checking is work for one core, and the loader that follows is too; so the second half of a large file goes to
a process of its own. It gets what it needs in a file without a name, and leaves what it found in another.
"""

import os
import pickle
import subprocess
import sys
import tempfile
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, replace
from typing import IO

import pyarrow as pa

from rules.records import Refusal
from service.intake import columns, csv_file
from service.intake.consistency import Mask
from service.intake.incoming import Builder
from service.intake.sheet import Sheet

Progress = Callable[[int, int | None, str], None]  # how many are done, of how many, what is done

LARGE = 200_000  # rows; for fewer, starting a process takes longer than it saves
SHARE = 0.55  # of a large file that is checked here: the other process has to start first


@dataclass(frozen=True, slots=True)
class Part:
    """Rows to check, and how to build what the store keeps of them."""

    sheet: Sheet
    wanted: Mask
    builder: Builder


Found = tuple[list[pa.Table], list[Refusal]]


def check(part: Part, progress: Progress | None = None) -> Found:
    """The good rows as the store keeps them, block by block, and what is wrong with the others."""
    if not _can_be_halved(part.sheet):
        return _check(part, progress)
    here = round(len(part.wanted) * SHARE)
    with _elsewhere(_slice(part, here, None)) as found_there:
        tables, refused = _check(_slice(part, 0, here), progress)
        more_tables, more_refused = found_there()
    if progress is not None:
        progress(int(part.sheet.numbers[-1]), int(part.sheet.numbers[-1]), _WORDS)
    return tables + more_tables, refused + more_refused


_WORDS = "rows checked"


def _check(part: Part, progress: Progress | None = None) -> Found:
    tables: list[pa.Table] = []
    refused: list[Refusal] = []
    for block in csv_file.sift(part.sheet, part.wanted, part.builder.frame):
        refused += block.refused
        if len(block.numbers):
            tables.append(part.builder.build(block.values, block.numbers))
        if progress is not None:
            progress(block.last, int(part.sheet.numbers[-1]), _WORDS)
    return tables, refused


def _can_be_halved(sheet: Sheet) -> bool:
    """Whether a sheet is large, and no row's key depends on rows before it, as those without a record id do."""
    if len(sheet.numbers) < LARGE or (os.cpu_count() or 1) < 2 or "record_id" not in sheet.header:
        return False
    return all(columns.given(chunk).all() for chunk in sheet.columns["record_id"].chunks)


def _slice(part: Part, start: int, end: int | None) -> Part:
    rows = slice(start, end)
    size = len(part.wanted[rows])
    cut = replace(
        part.sheet, columns=part.sheet.columns.slice(start, size), numbers=part.sheet.numbers[rows], misfits=[]
    )
    return Part(cut, part.wanted[rows], part.builder)


# --- the other process -------------------------------------------------------------------------


@contextmanager
def _elsewhere(part: Part) -> Iterator[Callable[[], Found]]:
    """Check a part in a process of its own; gives a function that waits for what it found."""
    with tempfile.TemporaryFile() as given, tempfile.TemporaryFile() as found:
        pickle.dump(part, given, protocol=5)
        given.seek(0)
        process = subprocess.Popen(
            [sys.executable, "-c", f"from {__name__} import answer; answer()"], stdin=given, stdout=found
        )
        try:
            yield lambda: _found_by(process, found)
        finally:
            process.kill()
            process.wait()


def _found_by(process: "subprocess.Popen[bytes]", found: IO[bytes]) -> Found:
    if process.wait() != 0:
        raise RuntimeError(f"the process that checked half of the file ended with {process.returncode}")
    found.seek(0)
    result: Found = pickle.load(found)
    return result


def answer() -> None:
    """What the other process does."""
    part: Part = pickle.load(sys.stdin.buffer)
    pickle.dump(_check(part), sys.stdout.buffer, protocol=5)
