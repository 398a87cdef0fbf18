"""Observations on both stores: versions stay, a read sees what was knowable, digests agree in both forms."""

from datetime import date, timedelta

import pyarrow as pa

from rules.records import Observation, Why
from service.places import place
from service.store import observations
from service.store.base import Store
from service.store.observation_digest import bodies, content_digest, digests
from tests.builders import LAT, LON, NOW, TODAY, an_observation

FULL = an_observation(
    "csv:full",
    place=place(LAT, LON, uncertainty_m=25.0, elevation_m=12.5),
    paddock="p1",
    postcode="9001",
    crop="canola",
    stage=12,
    stage_scale="BBCH",
    count=3.5,
    unit="per_100cm2",
    units_sampled=20,
    method="counted in a quadrat",
    damage="silvered leaves",
    plants_per_m2=40.0,
    row_spacing_m=0.3,
    confidence="sure",
    spot_counts=(3.0, 0.0, 7.5),
    units_per_spot=5,
    spot_at=("edge", "middle", "middle"),
    trap="t1",
    lure="none",
    nights=2,
    serviced_on=TODAY,
    beneficials="a few ladybirds",
    treated_group="3A",
    treated_on=date(2026, 5, 1),
    note="near the gate, ünder the trees",
    why=Why.LOT,
    history=True,
    arrival_assumed=True,
)


def test_records_come_back_as_they_went_in(store: Store) -> None:
    plain = an_observation("csv:plain", present=False)
    with store.writing() as c:
        assert observations.add(c, [FULL, plain]) == 2
        assert observations.add(c, []) == 0
    with store.reading() as c:
        assert observations.read(c, "north", NOW) == [FULL, plain]
        assert observations.get(c, "csv:full", 1) == FULL
        assert observations.get(c, "csv:full", 2) is None


def test_a_read_sees_the_newest_version_that_was_knowable(store: Store) -> None:
    later = NOW + timedelta(days=2)
    first = an_observation("csv:1", count=3.0, unit="per_m2")
    second = an_observation("csv:1", version=2, count=30.0, unit="per_m2", arrived_at=later, knowable_from=later)
    with store.writing() as c:
        observations.add(c, [first, second])
    with store.reading() as c:
        assert observations.read(c, "north", NOW - timedelta(seconds=1)) == []
        assert observations.read(c, "north", later - timedelta(microseconds=1)) == [first]
        assert observations.read(c, "north", later) == [second]


def test_a_report_that_moved_away_is_gone_from_where_it_was(store: Store) -> None:
    with store.writing() as c:
        observations.add(c, [an_observation("csv:1"), an_observation("csv:1", version=2, district="south")])
    with store.reading() as c:
        assert observations.read(c, "north", NOW) == []
        assert [row.version for row in observations.read(c, "south", NOW)] == [2]


def test_a_read_can_be_narrowed(store: Store) -> None:
    rows = [
        an_observation("csv:1", day=TODAY - timedelta(days=2)),
        an_observation("csv:2", day=TODAY, pest="cutworms"),
        an_observation("csv:3", day=TODAY),
    ]
    with store.writing() as c:
        observations.add(c, rows)
    with store.reading() as c:
        assert observations.read(c, "north", NOW, pest="cutworms") == [rows[1]]
        assert observations.read(c, "north", NOW, first_day=TODAY) == rows[1:]
        assert observations.read(c, "north", NOW, last_day=TODAY - timedelta(days=1)) == rows[:1]


def test_a_digest_changes_with_every_reported_field_and_with_no_other() -> None:
    other = {
        "present": False, "day": date(2026, 5, 2), "place": place(LAT, LON + 0.5), "spot_counts": (3.0, 0.0, 7.0),
        "spot_at": ("edge", "edge", "middle"), "why": Why.ASKED, "serviced_on": None, "treated_on": None,
    }  # fmt: skip
    unreported = {"digest", "version", "arrived_at", "knowable_from", "history", "arrival_assumed"}
    before = content_digest(FULL)
    for name in Observation.__dataclass_fields__:
        value = getattr(FULL, name)
        changed = other.get(name, f"{value}x" if isinstance(value, str) else None)
        if name in unreported:
            changed = value
        values = {field: getattr(FULL, field) for field in Observation.__dataclass_fields__} | {name: changed}
        assert (content_digest(Observation(**values)) == before) == (name in unreported), name
    assert len(before) == 32


def test_columns_have_the_digests_of_their_records() -> None:
    columns = {
        name: pa.array([value, None])
        for name in Observation.__dataclass_fields__
        if (value := getattr(FULL, name)) is not None and not isinstance(value, tuple) and name not in ("place", "why")
    }
    columns |= {
        "why": pa.array(["drawn by lot", "unknown"]),
        "spot_counts": pa.array(["3.0;0.0;7.5", None]),
        "spot_at": pa.array(["edge;middle;middle", None]),
        "latitude": pa.array([LAT, LAT]),
        "longitude": pa.array([LON, -0.0]),
        "uncertainty_m": pa.array([25.0, None]),
        "present": pa.array([True, False]),
        "day": pa.array([TODAY, TODAY]),
        "district": pa.array(["north", "north"]),
        "pest": pa.array(["redlegged_earth_mite", "cutworms"]),
        "reporter": pa.array(["ivy", "ivy"]),
    }
    bare = an_observation("csv:bare", present=False, pest="cutworms", place=place(LAT, 0.0), why=Why.UNKNOWN)
    found = digests(bodies(columns, 2), ["csv:full", "csv:bare"])
    assert [digest.hex() for digest in found] == [content_digest(FULL), content_digest(bare)]
