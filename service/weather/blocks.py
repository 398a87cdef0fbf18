"""Blocks of cell days: one variable of one district's month, compressed, named by a hash of its inputs.

The name covers the values themselves, not what the store says of them, so that a changed row, station or
height gives another block, and an unchanged month is never worked out twice. The content's own hash is
checked on every read.
"""

import hashlib
import json
import zlib
from datetime import date

import numpy as np
import numpy.typing as npt

from service.store.weather import Block
from service.weather import cells
from service.weather.cells import Field, Floats

METHOD = f"idw power {cells.POWER} nearest {cells.NEAREST} reach {cells.REACH_KM} lapse {cells.LAPSE_C_PER_KM}"
VARIABLES = ("tmin", "tmax", "rain")


def key_of(district: str, month: date, variable: str, field: Field, values: Floats) -> str:
    """The hash of everything that a block is worked out from."""
    head = json.dumps([METHOD, district, month.isoformat(), variable, field.stations, values.shape])
    arrays = (field.cells, field.distance, field.station_height, field.cell_height, values)
    return _hash(head.encode(), *(np.ascontiguousarray(array).tobytes() for array in arrays))


def pack(
    key: str, district: str, month: date, variable: str, ids: npt.NDArray[np.int64], data: npt.NDArray[np.float32]
) -> Block:
    """A block ready to be kept."""
    head = {"name": variable, "first_day": month.isoformat(), "days": len(data), "cells": len(ids)}
    raw = json.dumps(head).encode() + b"\n" + ids.astype("<i8").tobytes() + data.astype("<f4").tobytes()
    packed = zlib.compress(raw)
    return Block(key, district, month, variable, _hash(key.encode(), packed), packed)


def unpack(block: Block) -> npt.NDArray[np.float32] | None:
    """The values (days, cells) of a kept block; None where it is not what was put there."""
    if _hash(block.key.encode(), block.data) != block.content:
        return None
    line, _, rest = zlib.decompress(block.data).partition(b"\n")
    head = json.loads(line)
    values = np.frombuffer(rest, "<f4", offset=8 * head["cells"])
    return values.reshape(head["days"], head["cells"]).astype(np.float32)


def _hash(*parts: bytes) -> str:
    total = hashlib.sha256()
    for part in parts:
        total.update(part)
    return total.hexdigest()
