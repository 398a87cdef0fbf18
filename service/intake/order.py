"""The order in which keys ascend, byte by byte: a million of them in a fraction of the usual time."""

from itertools import takewhile

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc

_BYTES = 8  # as many as one comparison of integers holds


def ascending(keys: pa.Array) -> npt.NDArray[np.int64]:
    """Where the rows stand, in the order of their keys.

    The bytes that follow what all keys begin with tell nearly all of them apart. The others stand next to each
    other after that, and are put in order by their whole keys.
    """
    found: npt.NDArray[np.int64] = np.argsort(heads := _heads(keys))
    heads = heads[found]
    alike = np.zeros(len(heads), bool)
    alike[1:] = heads[1:] == heads[:-1]
    alike[:-1] |= alike[1:]
    if alike.any():
        places = found[alike]
        found[alike] = places[pc.sort_indices(keys.take(pa.array(places))).to_numpy()]
    return found


def _heads(keys: pa.Array) -> npt.NDArray[np.uint64]:
    """The first bytes of each key in which keys can differ, as a number; what is shorter is filled with zeros."""
    extremes = pc.min_max(keys.cast(pa.binary())).as_py()
    pairs = zip(extremes["min"], extremes["max"], strict=False)
    shared = sum(1 for _ in takewhile(lambda pair: pair[0] == pair[1], pairs))
    _, ends, text = keys.buffers()
    offsets = np.frombuffer(ends, np.int32)[keys.offset :][: len(keys) + 1]
    data = np.frombuffer(text, np.uint8)
    heads = np.zeros((len(keys), _BYTES), np.uint8)
    for at in range(_BYTES):
        places = offsets[:-1] + shared + at
        there = places < offsets[1:]
        heads[there, at] = data[places[there]]
    found: npt.NDArray[np.uint64] = heads.view(">u8")[:, 0].astype(np.uint64)
    return found
