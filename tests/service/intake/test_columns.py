"""Checking in columns says of every row what the model says of it alone, and keeps the same values."""

from dataclasses import replace
from datetime import date
from typing import Any

import numpy as np
import pyarrow as pa
from hypothesis import given, settings
from hypothesis import strategies as st

from service import rulebook
from service.intake import columns
from service.intake.frame import Frame, Names
from service.intake.observation import COLUMNS, Observation, refusals
from service.places import place
from service.store.base import micros
from tests.builders import LON, NOW, a_district, a_paddock, a_postcode

BARE = Frame(Names.of(rulebook.load()), NOW)
NETWORK = replace(
    BARE,
    districts={"north": a_district(), "south": a_district(id="south", latitude=-60.0)},
    postcodes={
        "9001": {"north": a_postcode(), "south": a_postcode(district="south")},
        "9002": {"south": a_postcode(district="south", code="9002", place=place(-57.5, LON))},
    },
    paddocks={"p1": a_paddock(), "p2": a_paddock("p2", district="south")},
    people=frozenset({"ivy", "ada"}),
)

# For each column: texts at and beyond the edge of what it takes.
EDGES: dict[str, list[str]] = {
    "day": ["2026-05-10", "2026-05-12", "2026-05-13", "2026-05-14", "2026-02-30", "1949-12-31", "10/05/2026"],
    "pest": ["RLEM", " cutworms ", "lucerne  flea", "moth"],
    "status": ["present", "ABSENT", "maybe"],
    "reporter": ["ivy", "ada", "bob", "i\nvy"],
    "record_id": ["1", "=1", "a b", "x" * 100, "x" * 101, "ü", "a\u2028b"],
    "source": ["phone", "a:b"],
    "latitude": ["-46", "-46.0", "-46.5 ", "0", "-0", "-90", "-90.01", "100", "-60", "-48.24",
                 "-48.26", "nan", "1e1", ".5", "-46,5"],
    "longitude": ["100", "0", "-100", "180", "180.5", "-46", "inf", "1_0", "٣"],
    "uncertainty_m": ["0", "10", "-1", "200001"],
    "paddock": ["p1", "p2", "p9"],
    "postcode": ["9001", "9002", "9999"],
    "district": ["north", "south", "east"],
    "crop": ["wheat", "canola", "oat", "rye"],
    "stage": ["0", "12", "12.0", "99", "100", "-1", "12.5"],
    "stage_scale": ["BBCH", "zadoks", "GS"],
    "count": ["0", "1", "100", "100.5", "1000000", "1000001", "-1", "3,5"],
    "unit": ["per_m2", "percent_plants", "PER_PLANT", "each"],
    "units_sampled": ["1", "0"],
    "method": ["by hand", "<5", "<b>", "+", "x" * 500, "x" * 501],
    "damage": ["5 > 3", "a\tb", "a\u202eb"],
    "plants_per_m2": ["40", "-0.0"],
    "row_spacing_m": ["0.3", "6"],
    "confidence": ["sure", "Fairly Sure", "certain"],
    "why": ["asked", "drawn by lot", "bored"],
    "spot_counts": ["0;0", "1;2", "1; 2.5", "1;x", ";"],
    "units_per_spot": ["5", "5.5"],
    "spot_at": ["edge;middle", "edge", "gate"],
    "trap": ["t1", "<t>"],
    "lure": ["none", "-"],
    "nights": ["1", "0"],
    "serviced_on": ["2026-05-12", "2026-05-13"],
    "beneficials": ["many", "@x"],
    "treated_group": ["3A", "28", "un", "none", "Brand"],
    "treated_on": ["2026-05-01", "2027-01-01"],
    "note": ["near the gate", "=1+1", "a\nb", "a\x7fb", "a\x85b"],
    "arrived_at": ["2026-05-10T00:00Z", "2026-05-09T10:00+00:00", "2026-05-09T09:59Z", "2026-05-12T02:01Z",
                   "2026-05-10"],
}  # fmt: skip
ROWS = st.lists(
    st.fixed_dictionaries({name: st.sampled_from(["", *texts[:2], *texts]) for name, texts in EDGES.items()}),
    min_size=1,
    max_size=30,
)
PLAUSIBLE = ("day", "pest", "status", "reporter", "latitude", "longitude")


def test_every_column_has_its_edges() -> None:
    assert set(EDGES) == set(COLUMNS)


def _same(value: Any, stored: Any) -> bool:
    """Whether a column holds what the model reads."""
    if isinstance(value, tuple):
        value = ";".join(repr(part) if isinstance(part, float) else part for part in value)
    if hasattr(value, "tzinfo"):
        value = micros(value)
    return bool(value == stored)


def _compare(rows: list[dict[str, str]], frame: Frame) -> int:
    names = list(rows[0])
    texts = {name: pa.array([row[name] for row in rows], pa.string()) for name in names}
    checked = columns.check(texts, frame)
    alone = np.array([not refusals(2, row, frame) for row in rows])
    wrong = [row for row, one, many in zip(rows, alone, checked.good, strict=True) if one != many]
    assert wrong == []
    for at in np.flatnonzero(alone).tolist():
        model = Observation.model_validate(rows[at], context=frame)
        for name in names:
            if name != "district":  # columns hold the district that the row is in
                assert _same(getattr(model, name), checked.values[name][at].as_py()), (name, rows[at])
    return int(alone.sum())


@settings(max_examples=40, deadline=None)
@given(rows=ROWS, chosen=st.sets(st.sampled_from(sorted(EDGES)), max_size=5))
def test_columns_and_model_agree_on_rows_with_a_few_odd_cells(rows: list[dict[str, str]], chosen: set[str]) -> None:
    good = {"day": "2026-05-10", "pest": "RLEM", "status": "present", "reporter": "ivy", "latitude": "-46",
            "longitude": "100", "district": "north"}  # fmt: skip
    few = [{name: row[name] if name in chosen else good.get(name, "") for name in row} for row in rows]
    for frame in (BARE, NETWORK):
        _compare(few, frame)


@settings(max_examples=20, deadline=None)
@given(rows=ROWS)
def test_columns_and_model_agree_on_rows_that_are_odd_all_over(rows: list[dict[str, str]]) -> None:
    for frame in (BARE, NETWORK):
        _compare(rows, frame)


@settings(max_examples=40, deadline=None)
@given(texts=st.lists(st.text(max_size=8), min_size=1, max_size=20), name=st.sampled_from(sorted(EDGES)))
def test_columns_and_model_agree_on_any_text(texts: list[str], name: str) -> None:
    good = {"day": "2026-05-10", "pest": "RLEM", "status": "absent", "reporter": "ivy", "paddock": "p1"}
    _compare([good | {name: text} for text in texts], NETWORK)


def test_each_single_edge_alone() -> None:
    """One row for each text of the table; some of them can be taken, so that the test tells them apart."""
    good = {"day": "2026-05-10", "pest": "RLEM", "status": "present", "reporter": "ivy", "latitude": "-46",
            "longitude": "100", "district": "north", "unit": "per_m2"}  # fmt: skip
    rows = [dict.fromkeys(EDGES, "") | good | {name: text} for name, texts in EDGES.items() for text in texts]
    taken = _compare(rows, NETWORK)
    assert 50 < taken < len(rows) - 50
    assert date(2026, 5, 12) == NETWORK.today("north")
