"""The digest of an observation: of one record, and of a million rows in columns, to the same bytes.

It is the first 128 bits of the SHA-256 of all that was reported: the numbers as little-endian doubles, the
texts after them separated by U+001F, and the key last. When a row arrived and became knowable, and its
version, are no part of it.
"""

import struct
from collections.abc import Mapping
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


def bodies(columns: Mapping[str, pa.Array], rows: int) -> list[bytes]:
    """What each of some rows says, without its key: the bytes that its digest is taken of.

    `columns` hold what is given, under the names above; a column that is not there was not given.
    """
    packed = np.full((rows, len(NUMBERS)), nan)
    for at, name in enumerate(NUMBERS):
        if name in columns:
            packed[:, at] = _doubles(columns[name])
    width = packed.shape[1] * 8
    numbers = packed.tobytes()
    texts = _joined([columns.get(name) for name in TEXTS], rows)
    return [
        numbers[start : start + width] + text for start, text in zip(range(0, rows * width, width), texts, strict=True)
    ]


def _doubles(column: pa.Array) -> npt.NDArray[np.float64]:
    if pa.types.is_boolean(column.type):
        column = column.cast(pa.int8())
    found: npt.NDArray[np.float64] = column.cast(pa.float64()).to_numpy(zero_copy_only=False) + 0.0
    return found


def _joined(columns: list[pa.Array | None], rows: int) -> list[bytes]:
    """The columns beside each other as text; runs of columns that are not there cost nothing."""
    parts: list[Any] = []
    fixed = ""
    for at, column in enumerate(columns):
        fixed += _BETWEEN if at else ""
        if column is not None:
            parts += [pa.scalar(fixed), column.cast(pa.string())]
            fixed = ""
    joined = pc.binary_join_element_wise(*parts, fixed, "", null_handling="replace", null_replacement="")
    found: list[bytes] = joined.cast(pa.binary()).to_numpy(zero_copy_only=False).tolist()
    return found


def digests(bodies: list[bytes], keys: list[str]) -> list[bytes]:
    """The digests of rows from their bodies and keys."""
    return [sha256(body + b"\x1f" + key.encode()).digest()[:SIZE] for body, key in zip(bodies, keys, strict=True)]
