"""A million rows checked at once: one mask over each column, one for each rule between columns.

Says of every row the same as the model `Observation` does (a test holds them together); only the rows that
fail here go through the model, for the words to each fault.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from service import rows
from service.intake import cells, consistency
from service.intake.consistency import Mask, Numbers
from service.intake.frame import Frame
from service.intake.where import district_of, place_of
from service.store.base import micros

# What `rows.unsafe` refuses, as one pattern; a < is spared in words of the reporter's own.
_INVISIBLE = r"\x00-\x1f\x7f-\x{9f}\x{2028}-\x{202e}\x{2066}-\x{2069}"
_UNSAFE = rf"^[=+\-@]|[<>{_INVISIBLE}]"
_UNSAFE_PROSE = rf"^[=+\-@]|<[A-Za-z/!?]|[{_INVISIBLE}]"


@dataclass(frozen=True, slots=True)
class Checked:
    """The rows of a block: which can be taken, and what each column holds (null where it does not)."""

    good: Mask
    values: dict[str, pa.Array]


def check(columns: Mapping[str, pa.Array], frame: Frame) -> Checked:
    """Check a block of rows, given as columns of text."""
    size = len(next(iter(columns.values())))
    good = np.ones(size, bool)
    values: dict[str, pa.Array] = {}
    for name, column in columns.items():
        values[name], fine = _column(name, column, frame)
        good &= fine
    values |= _spots(values)
    values |= _districts(values, size, frame)
    good &= ~consistency.broken(_View(values, size), frame)
    return Checked(good, values)


# --- one column --------------------------------------------------------------------------------


def _column(name: str, column: pa.Array, frame: Frame) -> tuple[pa.Array, Mask]:
    if name in cells.BOUNDS:
        return _numbers(column, *cells.BOUNDS[name])
    if name in cells.PLAIN:
        return _texts(column, _UNSAFE, cells.LONGEST_ID)
    if name in cells.PROSE:
        return _texts(column, _UNSAFE_PROSE, rows.LONGEST)
    return _few(name, column, frame)


def _numbers(column: pa.Array, low: float, high: float) -> tuple[pa.Array, Mask]:
    trimmed, empty = _trimmed(column)
    formed = pc.match_substring_regex(trimmed, f"^(?:{cells.NUMBER})$")
    found = pc.cast(pc.if_else(formed, trimmed, pa.scalar(None, pa.string())), pa.float64())
    within = pc.fill_null(pc.and_(pc.greater_equal(found, low), pc.less_equal(found, high)), False)
    return pc.if_else(within, found, pa.scalar(None, pa.float64())), _mask(pc.or_(empty, within))


def _texts(column: pa.Array, unsafe: str, longest: int) -> tuple[pa.Array, Mask]:
    trimmed, empty = _trimmed(column)
    fine = pc.and_(
        pc.invert(pc.match_substring_regex(trimmed, unsafe)), pc.less_equal(pc.utf8_length(trimmed), longest)
    )
    return pc.if_else(pc.and_(fine, pc.invert(empty)), trimmed, pa.scalar(None, pa.string())), _mask(fine)


def _few(name: str, column: pa.Array, frame: Frame) -> tuple[pa.Array, Mask]:
    """A column of few different texts: each is read once, as in a single row."""
    coded = column.dictionary_encode()
    found, fine = [], []
    for text in coded.dictionary.to_pylist():
        try:
            found.append(_stored(cells.read(name, text, frame)))
            fine.append(True)
        except ValueError:
            found.append(None)
            fine.append(False)
    values = pa.array(found, TYPES.get(name, pa.string())).take(coded.indices)
    return values, np.array(fine, bool)[coded.indices.to_numpy()]


TYPES = (
    {name: pa.int64() for name in cells.WHOLE} | {name: pa.date32() for name in cells.DAYS} | {"arrived_at": pa.int64()}
)


def _stored(value: Any) -> Any:
    """A cell's value as the store holds it."""
    if isinstance(value, tuple):
        return ";".join(repr(part) if isinstance(part, float) else part for part in value)
    return micros(value) if isinstance(value, datetime) else value


def given(column: pa.Array) -> Mask:
    """The cells that have something in them."""
    return ~_mask(_trimmed(column)[1])


def _trimmed(column: pa.Array) -> tuple[pa.Array, pa.Array]:
    trimmed = pc.ascii_trim(column, cells.SPACES)
    return trimmed, pc.equal(trimmed, "")


def _mask(array: pa.Array) -> Mask:
    found: Mask = array.to_numpy(zero_copy_only=False)
    return found


# --- what follows from several columns ---------------------------------------------------------


def combined(values: Mapping[str, pa.Array], names: Sequence[str], size: int) -> tuple[list[tuple[Any, ...]], Any]:
    """The different combinations of some columns' values, and which of them each row has."""
    code = np.zeros(size, np.int64)
    choices: list[list[Any]] = []
    for name in names:
        if name not in values:
            choices.append([None])
            continue
        coded = values[name].dictionary_encode()
        choices.append([None, *coded.dictionary.to_pylist()])
        code = code * len(choices[-1]) + pc.fill_null(pc.add(coded.indices, 1), 0).to_numpy(zero_copy_only=False)
    different, which = np.unique(code, return_inverse=True)
    combinations = []
    for each in different.tolist():
        parts = []
        for some in reversed(choices):
            each, at = divmod(each, len(some))
            parts.append(some[at])
        combinations.append(tuple(reversed(parts)))
    return combinations, which


WHERE = ("paddock", "postcode", "district")


def _districts(values: Mapping[str, pa.Array], size: int, frame: Frame) -> dict[str, pa.Array]:
    different, which = combined(values, WHERE, size)
    found = [district_of(frame, *each) for each in different]
    return {
        "district": pa.array([district for district, _ in found], pa.string()).take(pa.array(which)),
        "misplaced": pa.array([True if wrong else None for _, wrong in found], pa.bool_()).take(pa.array(which)),
    }


def _spots(values: Mapping[str, pa.Array]) -> dict[str, pa.Array]:
    found: dict[str, pa.Array] = {}
    if "spot_counts" in values:
        found["spot_n"] = _of_each(values["spot_counts"], lambda text: text.count(";") + 1)
        found["spot_total"] = _of_each(values["spot_counts"], lambda text: sum(map(float, text.split(";"))))
    if "spot_at" in values:
        found["spot_at_n"] = _of_each(values["spot_at"], lambda text: text.count(";") + 1)
    return found


def _of_each(column: pa.Array, function: Callable[[str], float]) -> pa.Array:
    coded = column.dictionary_encode()
    return pa.array(map(function, coded.dictionary.to_pylist()), pa.float64()).take(coded.indices)


def places(values: dict[str, pa.Array], size: int, frame: Frame) -> dict[str, pa.Array]:
    """Positions of good rows that gave none, from their paddock or postcode."""
    different, which = combined(values, WHERE, size)
    stand_ins = [place_of(frame, *each) for each in different]
    given = pc.is_valid(values["latitude"]) if "latitude" in values else pa.scalar(False)
    found = {}
    for name in ("latitude", "longitude", "uncertainty_m", "elevation_m"):
        theirs = pa.array([None if at is None else getattr(at, name) for at in stand_ins], pa.float64())
        standing_in = pc.if_else(given, pa.scalar(None, pa.float64()), theirs.take(pa.array(which)))
        found[name] = pc.coalesce(values.get(name, pa.nulls(size, pa.float64())), standing_in)
    return found


class _View:
    """A block as the consistency rules look at it."""

    def __init__(self, values: Mapping[str, pa.Array], size: int) -> None:
        self.values, self.rows = values, size

    def given(self, name: str) -> Mask:
        column = self.values.get(name)
        return np.zeros(self.rows, bool) if column is None else _mask(pc.is_valid(column))

    def number(self, name: str) -> Numbers:
        column = self.values.get(name)
        if column is None:
            return np.full(self.rows, np.nan)
        if name in cells.DAYS:
            return _doubles(column.cast(pa.int32())) + consistency.FIRST_DAY
        if name == "arrived_at":
            return consistency.day_number(_doubles(column))
        return _doubles(column)

    def equals(self, name: str, value: str) -> Mask:
        column = self.values.get(name)
        return np.zeros(self.rows, bool) if column is None else _mask(pc.fill_null(pc.equal(column, value), False))

    def mapped(self, name: str, numbers: Mapping[str, float]) -> Numbers:
        column = self.values.get(name)
        if column is None:
            return np.full(self.rows, np.nan)
        return _doubles(_of_each(column, lambda text: numbers.get(text, np.nan)))


def _doubles(column: pa.Array) -> Numbers:
    found: Numbers = pc.fill_null(column.cast(pa.float64()), np.nan).to_numpy(zero_copy_only=False)
    return found
