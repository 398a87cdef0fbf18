"""The quick order of keys is the plain one."""

import numpy as np
import pyarrow as pa
from hypothesis import given
from hypothesis import strategies as st

from service.intake.order import ascending

# Few different letters, and keys of up to a dozen: many share what they begin with, or are the same.
KEYS = st.lists(st.text("ab\u00e9\U0001f33e", max_size=12), min_size=1, max_size=40)


@given(KEYS, st.text("ab", max_size=5), st.integers(0, 3))
def test_keys_come_out_as_python_sorts_their_bytes(keys: list[str], first: str, skipped: int) -> None:
    keys = [first + key for key in keys]
    array = pa.array([*["z"] * skipped, *keys], pa.string())[skipped:]
    order = ascending(array)
    assert sorted(order.tolist()) == list(range(len(keys)))
    assert [keys[at] for at in order] == sorted(keys, key=str.encode)


def test_a_shared_beginning_longer_than_a_number_holds_does_not_hide_the_rest() -> None:
    keys = [f"csv:a-long-beginning-{n:07d}" for n in np.random.default_rng(7).permutation(2000)]
    assert [keys[at] for at in ascending(pa.array(keys))] == sorted(keys)
