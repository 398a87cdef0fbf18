"""A file of observations, sifted: rows that can be taken, and what is wrong with the others."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt
import pyarrow as pa

from rules.records import Refusal
from service import rulebook
from service.clock import Clock, SystemClock
from service.intake import columns, sheet
from service.intake.consistency import Mask
from service.intake.frame import Frame, Names
from service.intake.observation import Observation, refusals
from service.intake.sheet import Sheet

BLOCK = 131_072  # rows checked together


@dataclass(frozen=True, slots=True)
class Block:
    """A run of rows: the values and numbers of the good ones, and what is wrong with the others."""

    values: dict[str, pa.Array]
    numbers: npt.NDArray[np.int64]
    refused: list[Refusal]
    last: int  # the number of the last row looked at


def sift(whole: Sheet, wanted: Mask, frame: Frame) -> Iterator[Block]:
    """Check the wanted rows of a sheet, block by block."""
    for start in range(0, len(whole.numbers), BLOCK):
        table = whole.columns.slice(start, BLOCK)
        numbers = whole.numbers[start : start + BLOCK]
        last = numbers[-1]
        mask = wanted[start : start + BLOCK] & _filled(table)
        if not mask.all():
            table, numbers = table.filter(pa.array(mask)), numbers[mask]
        yield _block(table, numbers, frame, int(last))


def _block(table: pa.Table, numbers: npt.NDArray[np.int64], frame: Frame, last: int) -> Block:
    texts = {name: table[name].combine_chunks() for name in table.column_names}
    checked = columns.check(texts, frame)
    if checked.good.all():
        return Block(checked.values, numbers, [], last)
    bad = np.flatnonzero(~checked.good)
    told = zip(numbers[bad].tolist(), table.take(pa.array(bad)).to_pylist(), strict=True)
    refused = [refusal for number, row in told for refusal in refusals(number, row, frame)]
    good = pa.array(checked.good)
    values = {name: column.filter(good) for name, column in checked.values.items()}
    return Block(values, numbers[checked.good], refused, last)


def _filled(table: pa.Table) -> Mask:
    """Rows with something in them; spreadsheets leave empty ones at the end."""
    filled = np.zeros(table.num_rows, bool)
    for name in table.column_names:
        if filled.all():
            break
        filled |= np.concatenate([columns.given(chunk) for chunk in table[name].chunks])
    return filled


def misfits(whole: Sheet, without: set[int] | frozenset[int] = frozenset()) -> list[Refusal]:
    """What is wrong with rows that have not one cell for each column."""
    return [
        Refusal(misfit.number, "(row)", ",".join(misfit.cells)[:80], misfit.remedy)
        for misfit in whole.misfits
        if misfit.number not in without
    ]


class Good(Sequence[Observation]):
    """The rows of a file that can be taken; each is made into a model when it is looked at."""

    def __init__(self, rows: pa.Table, frame: Frame) -> None:
        self._rows, self._frame = rows, frame

    def __len__(self) -> int:
        return int(self._rows.num_rows)

    def __getitem__(self, at):  # type: ignore[no-untyped-def]
        if isinstance(at, slice):
            return [self[each] for each in range(*at.indices(len(self)))]
        row = self._rows.slice(range(len(self))[at], 1).to_pylist()[0]
        return Observation.model_validate(row, context=self._frame)


def read(path: Path | str, clock: Clock | None = None) -> tuple[Good, list[Refusal]]:
    """Check a file by itself: form, catalogue and consistency, but no reference into a network.

    Returns the good rows in their order and, for each of the others, row, field, value and remedy.
    BadInput where the file is no table of observations. Takes nothing; `take_observations` does.
    """
    frame = Frame(Names.of(rulebook.load()), (clock or SystemClock()).now())
    whole = sheet.read(Path(path))
    refused = misfits(whole)
    good = np.zeros(len(whole.numbers), bool)
    for block in sift(whole, np.ones(len(whole.numbers), bool), frame):
        good[np.searchsorted(whole.numbers, block.numbers)] = True
        refused += block.refused
    return Good(whole.columns.filter(pa.array(good)), frame), sorted(refused, key=lambda each: each.row)
