"""Check a sheet and build the store's rows of it; a large one in two processes, a half each.

Checking is work for one core, and the loader that follows is too; so the second half of a large file goes to
a process of its own, started while the file is still being read.
"""

import os
import pickle
import subprocess
import sys
import tempfile
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass, replace
from pathlib import Path
from typing import IO

import pyarrow as pa

from rules.records import Refusal
from service.intake import columns, csv_file
from service.intake.consistency import Mask
from service.intake.incoming import Builder
from service.intake.memory import for_many_rows
from service.intake.sheet import Sheet

Progress = Callable[[int, int | None, str], None]  # how many are done, of how many, what is done

LARGE = 16_000_000  # bytes of a file; for fewer, starting a process takes longer than it saves


@dataclass(frozen=True, slots=True)
class Part:
    """Rows to check, and how to build what the store keeps of them."""

    sheet: Sheet
    wanted: Mask
    builder: Builder


Found = tuple[list[pa.Table], list[Refusal]]


def check(part: Part, helper: "Helper | None" = None, progress: Progress | None = None) -> Found:
    """The good rows as the store keeps them, block by block, and what is wrong with the others."""
    if helper is None or not _can_be_halved(part.sheet):
        return _check(part, progress)
    here = len(part.wanted) * 11 // 20  # the other process has to be told first, and to answer
    rest = _slice(part, here, None)
    helper.give(rest)
    tables, refused = _check(_slice(part, 0, here), progress)
    more_tables, more_refused = helper.found() or _check(rest)
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
    """Whether no row's key depends on rows before it, as those of rows without a record id do."""
    if "record_id" not in sheet.header:
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


class Helper:
    """A process that checks one part of a sheet, once it is given one."""

    def __init__(self, answers: IO[bytes]) -> None:
        command = [sys.executable, "-c", f"from {__name__} import answer; answer()"]
        self._answers = answers
        reading, writing = os.pipe()
        self._process = subprocess.Popen(command, stdin=reading, stdout=answers, stderr=subprocess.DEVNULL)
        os.close(reading)
        self._pipe = os.fdopen(writing, "wb")

    def give(self, part: Part) -> None:
        """Hand it the part; returns when it has read it."""
        with suppress(BrokenPipeError):  # it has ended: `found` will say so
            pickle.dump(part, self._pipe, protocol=5)
            self._pipe.flush()

    def found(self) -> Found | None:
        """Wait for what it found; None if it could not do its work, for want of memory perhaps."""
        if self._process.wait() != 0:
            return None
        self._answers.seek(0)
        result: Found = pickle.load(self._answers)
        return result

    def stop(self) -> None:
        """End it, whatever it is doing."""
        self._process.kill()
        self._process.wait()
        with suppress(BrokenPipeError):
            self._pipe.close()


@contextmanager
def helper_for(path: Path) -> Iterator[Helper | None]:
    """A helper, starting while the file is read, if the file is large and there is a core for it."""
    if not path.is_file() or path.stat().st_size < LARGE or (os.cpu_count() or 1) < 2:
        yield None
        return
    with tempfile.TemporaryFile() as answers:
        helper = Helper(answers)
        try:
            yield helper
        finally:
            helper.stop()


def answer() -> None:
    """What the other process does."""
    with for_many_rows():
        part: Part = pickle.load(sys.stdin.buffer)
        pickle.dump(_check(part), sys.stdout.buffer, protocol=5)
    sys.stdout.flush()
    os._exit(0)  # somebody waits for the end, and nothing is left to tidy up
