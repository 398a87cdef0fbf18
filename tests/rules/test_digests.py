"""The canonical form: the same content gives the same text and hash, other content another."""

import hashlib
from dataclasses import dataclass, replace
from datetime import UTC, date, datetime
from enum import StrEnum
from types import MappingProxyType

import numpy as np
import pytest

from rules.digests import canonical, digest, plain
from rules.records import Why
from tests.builders import a_paddock, an_observation


class Colour(StrEnum):
    DARK = "dark"


@dataclass(frozen=True)
class Pair:
    left: object
    right: object


def test_a_record_becomes_json_types_all_the_way_down() -> None:
    record = Pair(Pair(date(2026, 5, 12), Colour.DARK), {"b": (1, None), "a": np.float64(0.5)})
    assert plain(record) == {
        "left": {"left": "2026-05-12", "right": "dark"},
        "right": {"b": [1, None], "a": 0.5},
    }
    assert type(plain(Colour.DARK)) is str
    assert type(plain(np.int64(3))) is int


def test_the_canonical_text_is_sorted_unspaced_and_unescaped() -> None:
    # RFC 8259 JSON, written out by hand
    assert canonical({"b": [1, 2.5], "a": "Ōtara", "c": None}) == '{"a":"Ōtara","b":[1,2.5],"c":null}'


def test_order_of_keys_and_kind_of_container_do_not_matter() -> None:
    assert digest({"a": 1, "b": (2, 3)}) == digest(MappingProxyType({"b": [2, 3], "a": 1}))


def test_the_digest_is_the_start_of_sha_256() -> None:
    assert digest({"a": 1}) == hashlib.sha256(b'{"a":1}').hexdigest()[:32]


@pytest.mark.parametrize(
    ("one", "other"),
    [
        *[(None, 0), (None, ""), (0, ""), (0, False), (1, "1"), ([], {}), ("a", ["a"])],
        *[([1, 2], [2, 1]), ({"a": None}, {}), (0.1, 0.1 + 1e-16 * 2)],
        (datetime(2026, 5, 12, tzinfo=UTC), date(2026, 5, 12)),
    ],
)
def test_other_content_has_another_digest(one: object, other: object) -> None:
    assert digest(one) != digest(other)


@pytest.mark.parametrize("value", [float("nan"), float("inf"), np.float32("nan")])
def test_what_json_does_not_know_is_no_content(value: float) -> None:
    with pytest.raises(ValueError, match="not JSON compliant"):
        digest({"a": value})


def test_what_has_no_order_is_refused() -> None:
    with pytest.raises(TypeError):
        digest({"a": {1, 2}})


def test_each_field_of_a_record_counts() -> None:
    base = an_observation()
    changes = [{"present": False}, {"count": 0.0}, {"why": Why.ASKED}, {"note": ""}, {"place": a_paddock().place}]
    assert len({digest(replace(base, **change)) for change in changes} | {digest(base)}) == 6
    assert digest(replace(base)) == digest(base)
