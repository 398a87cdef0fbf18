"""Looks derived from rows."""

import itertools
from datetime import timedelta

import pytest

from rules.looks import derive
from rules.records import Effort, Why
from service.places import place
from tests.builders import LAT, LON, NOW, TODAY, an_observation

PLAN = {"redlegged_earth_mite": 5}


def only(rows, plan=PLAN, **more):
    (look,) = derive(rows, plan, **more)
    return look


def test_rows_of_one_visit_are_one_look():
    rows = [
        an_observation("csv:2", paddock="p1", present=True, crop="canola", knowable_from=NOW + timedelta(hours=2)),
        an_observation("csv:1", paddock="p1", present=False),
    ]
    look = only(rows)
    assert (look.found, look.paddock, look.crop, look.rows) == (True, "p1", "canola", ("csv:1", "csv:2"))
    assert look.knowable_from == NOW + timedelta(hours=2)


@pytest.mark.parametrize(
    "other",
    [
        {"paddock": "p2"},
        {"paddock": None},
        {"reporter": "oak"},
        {"pest": "lucerne_flea"},
        {"day": TODAY - timedelta(days=1)},
        {"district": "south"},
    ],
    ids=str,
)
def test_another_place_person_pest_or_day_is_another_look(other):
    rows = [an_observation("csv:1", paddock="p1"), an_observation("csv:2", **({"paddock": "p1"} | other))]
    assert len(derive(rows, PLAN)) == 2


def test_without_a_paddock_the_cell_is_the_place():
    near, far = place(LAT, LON, uncertainty_m=500.0), place(LAT + 1, LON)
    exact = place(LAT, LON, uncertainty_m=20.0)
    rows = [an_observation(f"csv:{i}", place=where) for i, where in enumerate((near, exact, far))]
    looks = derive(rows, PLAN)
    assert sorted(len(look.rows) for look in looks) == [1, 2]
    assert next(look for look in looks if len(look.rows) == 2).place == exact


@pytest.mark.parametrize(
    ("size", "effort"),
    [
        ({"spot_counts": (0.0,) * 5}, Effort.COMPLETE),
        ({"spot_counts": (0.0,) * 4}, Effort.PARTIAL),
        ({"units_sampled": 50, "units_per_spot": 10}, Effort.COMPLETE),
        ({"units_sampled": 49, "units_per_spot": 10}, Effort.PARTIAL),
        ({"units_sampled": 500}, Effort.PARTIAL),
        ({"count": 3.0}, Effort.UNSIZED),
        ({}, Effort.UNSIZED),
    ],
    ids=str,
)
def test_effort(size, effort):
    assert only([an_observation(present=False, **size)]).effort is effort


def test_rows_that_may_count_the_same_spots_are_not_added_up():
    rows = [an_observation(f"csv:{i}", spot_counts=(1.0, 0.0, 2.0)) for i in range(2)]
    assert only(rows).effort is Effort.PARTIAL


def test_without_a_plan_no_look_is_complete():
    assert only([an_observation(spot_counts=(0.0,) * 50)], plan={}).effort is Effort.PARTIAL


@pytest.mark.parametrize(
    ("reasons", "why"),
    [
        ((Why.ROUTINE, Why.DAMAGE), Why.DAMAGE),
        ((Why.ASKED, Why.FIELD_DAY), Why.ASKED),
        ((Why.LOT, Why.ASKED), Why.ASKED),
        ((Why.UNKNOWN, Why.ROUTINE), Why.ROUTINE),
        ((Why.UNKNOWN, Why.UNKNOWN), Why.UNKNOWN),
    ],
)
def test_the_reason_that_makes_a_find_likeliest_stands_for_the_look(reasons, why):
    rows = [an_observation(f"csv:{i}", why=reason) for i, reason in enumerate(reasons)]
    assert only(rows).why is why


def test_a_look_where_the_pest_hides_says_nothing_unless_it_found():
    rows = [an_observation(f"csv:{i}", present=False, spot_counts=(0.0,) * 5) for i in range(2)]
    assert only(rows, uninformative={"csv:0", "csv:1"}).effort is Effort.UNINFORMATIVE
    assert only(rows, uninformative={"csv:0"}).effort is Effort.COMPLETE
    found = [an_observation("csv:0", spot_counts=(1.0,) * 5)]
    assert only(found, uninformative={"csv:0"}).effort is Effort.COMPLETE


@pytest.mark.parametrize("other", [None, False], ids=["alone", "beside an absence"])
def test_a_look_that_was_unsure_is_no_find_and_no_absence(other):
    rows = [an_observation("csv:1", confidence="unsure", spot_counts=(1.0,) * 5)]
    rows += [] if other is None else [an_observation("csv:2", present=other, spot_counts=(0.0,) * 5)]
    assert (only(rows).found, only(rows).effort) == (False, Effort.UNINFORMATIVE)


@pytest.mark.parametrize("confidence", [None, "fairly sure", "sure"])
def test_a_sure_find_beside_an_unsure_one_is_a_find(confidence):
    rows = [
        an_observation("csv:1", confidence="unsure", spot_counts=(1.0,) * 5),
        an_observation("csv:2", confidence=confidence, spot_counts=(1.0,) * 5),
    ]
    assert (only(rows).found, only(rows).effort) == (True, Effort.COMPLETE)


def test_an_absence_that_was_unsure_stays_a_look():
    row = an_observation("csv:1", present=False, confidence="unsure", spot_counts=(0.0,) * 5)
    assert (only([row]).found, only([row]).effort) == (False, Effort.COMPLETE)


def test_order_of_rows_changes_nothing():
    rows = [
        an_observation("csv:1", paddock="p1", crop="canola", why=Why.LOT),
        an_observation("csv:2", paddock="p1", crop="lupin", present=False),
        an_observation("csv:3", reporter="oak"),
        an_observation("csv:4", day=TODAY - timedelta(days=3)),
    ]
    first = derive(rows, PLAN)
    assert [look.day for look in first] == sorted(look.day for look in first)
    for shuffled in itertools.permutations(rows):
        assert derive(shuffled, PLAN) == first


def test_a_trap_reading_is_no_look():
    rows = [an_observation("csv:1", trap="t1", nights=7), an_observation("csv:2", unit="per_trap_night")]
    assert derive(rows, PLAN) == []
    assert len(derive([*rows, an_observation("csv:3")], PLAN)) == 1
