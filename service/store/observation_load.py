"""Many observations at once: what is new, what is known, what has changed, and all of it in one transaction.

Rows come validated, in columns, sorted by key; so they go in next to each other, and the write lock is
held only while they do.
"""

import io
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import chain
from typing import Any

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.csv as arrow_csv
from sqlalchemy import Connection, select, text

from service.errors import StoreDown
from service.store.observations import observation

_TOGETHER = 50  # rows in one INSERT of SQLite: half the time of one each
_BATCH = 65_536  # rows turned into the store's own form at a time
_SOME = 1_000  # texts that show if a column holds few different ones
_CACHE_KIB = 262_144  # pages kept while loading; the index on (district, day) is met in no order


@dataclass(frozen=True, slots=True)
class Versions:
    """What the store holds for some keys: the newest version (0 for none), and if its digest is the same."""

    newest: npt.NDArray[np.int64]
    same: npt.NDArray[np.bool_]


def known(c: Connection, keys: pa.Array, digests: pa.Array) -> Versions:
    """Compare keys, in ascending order, and digests with what the store holds."""
    found = Versions(np.zeros(len(keys), np.int64), np.zeros(len(keys), bool))
    if not len(keys) or c.scalar(select(observation.c.version).limit(1)) is None:
        return found
    binary = "BLOB" if c.dialect.name == "sqlite" else "BYTEA"
    c.execute(text(f"CREATE TEMPORARY TABLE incoming (at BIGINT, key TEXT PRIMARY KEY, digest {binary})"))
    table = pa.table({"at": pa.array(np.arange(len(keys))), "key": keys, "digest": digests})
    _insert(c, "incoming", table, {})
    for row in c.execute(text(_COMPARE)):
        found.newest[row.at] = row.version
        found.same[row.at] = bool(row.same)
    c.execute(text("DROP TABLE incoming"))
    return found


_COMPARE = """
SELECT incoming.at, held.version, held.digest = incoming.digest AS same
FROM incoming JOIN observation AS held ON held.key = incoming.key
WHERE NOT EXISTS (SELECT 1 FROM observation AS newer WHERE newer.key = held.key AND newer.version > held.version)
"""


def load(c: Connection, table: pa.Table, constants: dict[str, Any]) -> None:
    """Insert rows, in ascending order of their keys. `constants` are the columns that are equal in all of them."""
    if table.num_rows:
        _insert(c, "observation", table, constants)


def _insert(c: Connection, into: str, table: pa.Table, constants: dict[str, Any]) -> None:
    if c.dialect.name == "sqlite":
        _insert_sqlite(c, into, table, constants)
    else:
        _copy(c.connection.driver_connection, into, table, constants)


# --- SQLite ------------------------------------------------------------------------------------


def _insert_sqlite(c: Connection, into: str, table: pa.Table, constants: dict[str, Any]) -> None:
    c.exec_driver_sql(f"PRAGMA cache_size=-{_CACHE_KIB}")
    many, one = (_sql(into, table.column_names, constants, rows) for rows in (_TOGETHER, 1))
    for batch in table.to_batches(max_chunksize=_BATCH):
        batch = _by_day(batch)
        flat = tuple(chain.from_iterable(zip(*map(_objects, batch.columns), strict=True)))
        width = batch.num_columns
        whole = batch.num_rows // _TOGETHER * _TOGETHER * width
        for sql, pieces in ((many, _pieces(flat[:whole], _TOGETHER * width)), (one, _pieces(flat[whole:], width))):
            if pieces:
                c.exec_driver_sql(sql, pieces)


def _by_day(batch: pa.RecordBatch) -> pa.RecordBatch:
    """The rows of a batch by district and day, as the index on them is; their keys stay near each other."""
    if "day" not in batch.schema.names:
        return batch
    districts = batch["district"].dictionary_encode().indices.to_numpy().astype(np.int64)
    days = batch["day"].cast(pa.int32()).to_numpy()
    return batch.take(pa.array(np.argsort((districts << 32) + days)))


def _sql(into: str, names: Sequence[str], constants: dict[str, Any], rows: int) -> str:
    """OR ROLLBACK: a failure ends the whole transaction, so SQLite keeps no journal of each statement."""
    row = ", ".join([*map(_literal, constants.values()), *["?"] * len(names)])
    columns = ", ".join(f'"{name}"' for name in [*constants, *names])
    return f"INSERT OR ROLLBACK INTO {into} ({columns}) VALUES {', '.join([f'({row})'] * rows)}"


def _literal(value: bool | int | str) -> str:
    return f"'{value}'" if isinstance(value, str) else str(int(value))


def _pieces(flat: tuple[Any, ...], width: int) -> list[tuple[Any, ...]]:
    return [flat[at : at + width] for at in range(0, len(flat), width)]


def _objects(column: pa.Array) -> list[Any]:
    """A column as SQLite's driver takes it; few different values are made once."""
    if pa.types.is_date32(column.type):
        column = column.cast(pa.string())
    if pa.types.is_boolean(column.type):
        column = column.cast(pa.int8())
    if pa.types.is_string(column.type) or pa.types.is_dictionary(column.type):
        return _texts(column)
    if pa.types.is_fixed_size_binary(column.type):
        return [*map(bytearray, column.to_numpy(zero_copy_only=False))]  # the driver looks for an adapter of bytes
    if column.null_count:
        return list(column.to_pylist())
    objects: list[Any] = column.to_numpy(zero_copy_only=False).tolist()
    return objects


def _texts(column: pa.Array) -> list[Any]:
    some = column[:_SOME]
    if len(some.unique()) > len(some) // 2:
        return list(column.to_numpy(zero_copy_only=False).tolist())
    coded = column.dictionary_encode()
    values = np.array([None, *coded.dictionary.to_pylist()], object)
    return list(values[pc.fill_null(pc.add(coded.indices, 1), 0).to_numpy(zero_copy_only=False)].tolist())


# --- PostgreSQL --------------------------------------------------------------------------------


def _copy(raw: Any, into: str, table: pa.Table, constants: dict[str, Any]) -> None:
    from psycopg import OperationalError as PostgresGone  # not loaded where the store is a file

    columns = ", ".join(f'"{name}"' for name in [*constants, *table.column_names])
    try:
        with raw.cursor() as cursor, cursor.copy(f"COPY {into} ({columns}) FROM STDIN (FORMAT csv)") as copy:
            for batch in table.to_batches(max_chunksize=_BATCH):
                copy.write(_csv(batch, constants))
    except PostgresGone as error:
        raise StoreDown(f"the store did not answer: {error}") from error


def _csv(batch: pa.RecordBatch, constants: dict[str, Any]) -> memoryview:
    """Rows as PostgreSQL reads CSV: nothing for what is not given, quotation marks round every text."""
    same = [pa.array([value], _TYPE_OF[type(value)]) for value in constants.values()]
    zeros = pa.array(np.zeros(batch.num_rows, np.int8))
    columns = [*(value.take(zeros) for value in same), *map(_plain, batch.columns)]
    names = [str(at) for at in range(len(columns))]
    sink = io.BytesIO()
    arrow_csv.write_csv(pa.table(columns, names), sink, arrow_csv.WriteOptions(include_header=False))
    return sink.getbuffer()


_TYPE_OF = {bool: pa.bool_(), int: pa.int64(), str: pa.string()}


def _plain(column: pa.Array) -> pa.Array:
    if pa.types.is_dictionary(column.type):
        return column.dictionary_decode()
    if not pa.types.is_fixed_size_binary(column.type):
        return column
    width = column.type.byte_width
    raw = column.buffers()[1].slice(column.offset * width, len(column) * width).to_pybytes().hex()
    starts = np.arange(len(column) + 1, dtype=np.int32) * (2 * width)
    digits = pa.StringArray.from_buffers(len(column), pa.py_buffer(starts), pa.py_buffer(raw.encode()))
    return pc.binary_join_element_wise("\\x", digits, "")
