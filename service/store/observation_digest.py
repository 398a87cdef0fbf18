"""The digest of an observation: of one record, and of a million rows in columns, to the same bytes.

It is the first 128 bits of the SHA-256 of all that was reported: the numbers as little-endian doubles, the
texts after them separated by U+001F, and the key last. When a row arrived and became knowable, and its
version, are no part of it.
"""

import struct
from collections.abc import Mapping, Sequence
from datetime import date
from hashlib import sha256
from math import nan
from typing import Any

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc

from rules.records import Observation

SIZE = 16  # bytes
NUMBERS = (
    "present",
    "latitude",
    "longitude",
    "uncertainty_m",
    "stage",
    "count",
    "units_sampled",
    "plants_per_m2",
    "row_spacing_m",
    "units_per_spot",
    "nights",
)
TEXTS = (
    "district",
    "pest",
    "day",
    "reporter",
    "why",
    "paddock",
    "postcode",
    "crop",
    "stage_scale",
    "unit",
    "method",
    "damage",
    "confidence",
    "spot_counts",
    "spot_at",
    "trap",
    "lure",
    "serviced_on",
    "beneficials",
    "treated_group",
    "treated_on",
    "note",
)
_BETWEEN = "\x1f"


def content_digest(record: Observation) -> str:
    """The digest of what a record reports, as 32 hexadecimal digits."""
    numbers = [_number(_value(record, name)) for name in NUMBERS]
    texts = _BETWEEN.join(_text(_value(record, name)) for name in TEXTS)
    said = struct.pack(f"<{len(numbers)}d", *numbers) + texts.encode()
    return sha256(said + (_BETWEEN + record.key).encode()).digest()[:SIZE].hex()


def _value(record: Observation, name: str) -> Any:
    return getattr(record.place if name in ("latitude", "longitude", "uncertainty_m") else record, name)


def _number(value: float | None) -> float:
    return nan if value is None else value + 0.0  # -0.0 becomes 0.0


def _text(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, tuple):
        return ";".join(repr(part + 0.0) if isinstance(part, int | float) else part for part in value)
    return value.isoformat() if isinstance(value, date) else str(value)


def bodies(columns: Mapping[str, pa.Array], rows: int) -> pa.Array:
    """What each of some rows says, without its key: the bytes that its digest is taken of.

    `columns` hold what is given, under the names above; a column that is not there was not given.
    """
    parts: list[Any] = [_packed(columns, rows)]
    fixed = b""
    for at, name in enumerate(TEXTS):  # runs of columns that are not there cost nothing
        fixed += _BETWEEN.encode() if at else b""
        if name in columns:
            parts += [pa.scalar(fixed), columns[name].cast(pa.string()).cast(pa.binary())]
            fixed = b""
    return pc.binary_join_element_wise(*parts, fixed, b"", null_handling="replace", null_replacement=b"")


def _packed(columns: Mapping[str, pa.Array], rows: int) -> pa.Array:
    """The numbers of each row, one after the other."""
    packed = np.full((rows, len(NUMBERS)), nan)
    for at, name in enumerate(NUMBERS):
        if name in columns:
            packed[:, at] = _doubles(columns[name])
    ends = np.arange(rows + 1, dtype=np.int32) * (len(NUMBERS) * packed.itemsize)
    return pa.BinaryArray.from_buffers(pa.binary(), rows, [None, pa.py_buffer(ends), pa.py_buffer(packed)])


def _doubles(column: pa.Array) -> npt.NDArray[np.float64]:
    if pa.types.is_boolean(column.type):
        column = column.cast(pa.int8())
    found: npt.NDArray[np.float64] = column.cast(pa.float64()).to_numpy(zero_copy_only=False) + 0.0
    return found


def digests(bodies: pa.Array, keys: Sequence[str] | pa.Array) -> list[bytes]:
    """The digests of rows from their bodies and keys."""
    keyed = pa.array(keys, pa.string()).cast(pa.binary())
    said = pc.binary_join_element_wise(bodies, keyed, _BETWEEN.encode())
    return [sha256(each).digest()[:SIZE] for each in said.to_numpy(zero_copy_only=False).tolist()]
