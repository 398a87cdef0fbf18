"""Good rows in the shape the store keeps them in: with key, digest, cell, and when they became knowable."""

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import date, datetime, timedelta
from hashlib import sha256
from typing import Any

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc

from rules.records import Why
from service.clock import end_of_day
from service.intake import columns
from service.intake.frame import Frame
from service.places import cells_of
from service.store.base import micros
from service.store.observation_digest import SIZE, bodies, digests

# History without a stated arrival is taken to have come in this long after the end of its day: our choice.
ASSUMED_LAG = timedelta(days=3)

AS_GIVEN = (
    "district",
    "pest",
    "day",
    "reporter",
    "why",
    "paddock",
    "postcode",
    "crop",
    "stage",
    "stage_scale",
    "count",
    "unit",
    "units_sampled",
    "method",
    "damage",
    "plants_per_m2",
    "row_spacing_m",
    "confidence",
    "spot_counts",
    "units_per_spot",
    "spot_at",
    "trap",
    "lure",
    "nights",
    "serviced_on",
    "beneficials",
    "treated_group",
    "treated_on",
    "note",
)

CODED = ("district", "pest", "reporter", "paddock", "postcode", "crop", "unit", "confidence")  # few different texts


@dataclass(slots=True)
class Builder:
    """Builds the store's rows block by block; identical rows without a record id are numbered through a file."""

    frame: Frame
    source: str
    history: bool
    seen: Counter[bytes] = field(default_factory=Counter)

    def build(self, values: dict[str, pa.Array], numbers: npt.NDArray[np.int64]) -> pa.Table:
        """The rows of one block: only columns in which something is given, and the row numbers in the file."""
        size = len(numbers)
        found = {name: values[name] for name in AS_GIVEN if name in values and values[name].null_count < size}
        found["present"] = pc.equal(values["status"], "present")
        found |= columns.places(values, size, self.frame)
        why = pc.fill_null(values.get("why", pa.nulls(size, pa.string())), Why.UNKNOWN.value)
        said = bodies(found | {"why": why}, size)
        keys = self._keys(values, said)
        joined = b"".join(digests(said, keys))
        found["key"] = keys
        found["digest"] = pa.FixedSizeBinaryArray.from_buffers(pa.binary(SIZE), size, [None, pa.py_buffer(joined)])
        found["cell"] = pa.array(cells_of(*(found[name].to_numpy() for name in ("latitude", "longitude"))))
        found |= self._arrivals(found, values, size)
        kept = {name: _coded(name, column) for name, column in found.items() if column.null_count < size}
        return pa.table(kept | {"row": pa.array(numbers)})

    def _keys(self, values: Mapping[str, pa.Array], said: pa.Array) -> pa.Array:
        size = len(said)
        ids = values.get("record_id", pa.nulls(size, pa.string()))
        sources = pc.fill_null(values.get("source", pa.nulls(size, pa.string())), self.source)
        keys = pc.binary_join_element_wise(sources, pc.fill_null(ids, ""), ":")
        if not ids.null_count:
            return keys
        named: list[str] = keys.to_pylist()
        for at in np.flatnonzero(pc.is_null(ids).to_numpy(zero_copy_only=False)).tolist():
            name = named[at].encode() + sha256(said[at].as_py()).digest()[:SIZE]
            self.seen[name] += 1
            named[at] += f"#{name[-SIZE:].hex()}.{self.seen[name]}"
        return pa.array(named, pa.string())

    def _arrivals(
        self, found: Mapping[str, pa.Array], values: Mapping[str, pa.Array], size: int
    ) -> dict[str, pa.Array]:
        now = micros(self.frame.now)
        stated = values.get("arrived_at", pa.nulls(size, pa.int64()))
        if not self.history:
            return {"arrived_at": pc.fill_null(stated, now)} if stated.null_count < size else {}
        different, which = columns.combined(found, ("district", "day"), size)
        assumed = pa.array([micros(self._assumed(*each)) for each in different]).take(pa.array(which))
        arrived = pc.coalesce(stated, assumed)
        return {"arrived_at": arrived, "knowable_from": arrived, "arrival_assumed": pc.is_null(stated)}

    def _assumed(self, district: str, day: date) -> datetime:
        return min(end_of_day(day, self.frame.districts[district].zone) + ASSUMED_LAG, self.frame.now)

    def join(self, blocks: Sequence[pa.Table]) -> pa.Table:
        """The blocks as one table; where some give a column and others don't, with what is usual in it."""
        whole = pa.concat_tables(blocks, promote_options="default").unify_dictionaries()
        for name, value in self.constants(()).items():
            if name in whole.column_names and whole[name].null_count:
                at = whole.column_names.index(name)
                whole = whole.set_column(at, name, pc.fill_null(whole[name], value))
        return whole

    def constants(self, names: Sequence[str]) -> dict[str, Any]:
        """What is equal in all rows of this file, of the columns that `names` do not hold."""
        now = micros(self.frame.now)
        same = {
            "version": 1,
            "why": Why.UNKNOWN.value,
            "arrived_at": now,
            "knowable_from": now,
            "history": self.history,
            "arrival_assumed": False,
        }
        return {name: value for name, value in same.items() if name not in names}


def _coded(name: str, column: pa.Array) -> pa.Array:
    """A column of few different texts as their numbers: less to hand over, to put in order and to insert."""
    return column.dictionary_encode() if name in CODED else column
