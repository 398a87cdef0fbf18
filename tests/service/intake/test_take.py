"""Taking files of observations into real stores: once, all or nothing, and what comes back."""

import json
from datetime import UTC, date, datetime, timedelta
from pathlib import Path

import pytest

from rules.records import Observation, Why
from service.clock import SetClock
from service.errors import BadInput, NotFound
from service.intake import checking, csv_file
from service.intake.refusals import RowsRefused, reasons_path
from service.places import place
from service.store import observations
from service.store.base import Store
from service.store.observations import content_digest
from tests.builders import LAT, LON, NOW
from tests.service.intake.network import CLOCK, all_of, row, settle, take, write

NONE = {"new": 0, "revised": 0, "same": 0, "refused": 0, "to_the_hotline": None}


def test_a_full_row_becomes_a_record(store: Store, tmp_path: Path) -> None:
    settle(store)
    full = row(
        record_id="a7",
        uncertainty_m="30",
        paddock="p1",
        postcode="9001",
        crop="Oilseed Rape",
        stage="12",
        stage_scale="bbch",
        pest="Halotydeus destructor",
        count="3.5",
        unit="per_100cm2",
        units_sampled="20",
        method="quadrat",
        damage="silvered leaves",
        plants_per_m2="40",
        row_spacing_m="0.3",
        confidence="Fairly sure",
        why="drawn by lot",
        spot_counts="3;0; 7.5",
        units_per_spot="5",
        spot_at="edge;middle;middle",
        trap="t1",
        lure="none",
        nights="2",
        serviced_on="2026-05-09",
        beneficials="ladybirds",
        treated_group="3a",
        treated_on="2026-05-01",
        note="  mostly <5 a spot near the gate ",
        arrived_at="2026-05-11T09:30+09:30",
    )
    assert take(store, write(tmp_path, [full])) == NONE | {"new": 1}
    [found] = all_of(store)
    wanted = Observation(
        key="csv:a7",
        version=1,
        district="north",
        pest="redlegged_earth_mite",
        present=True,
        day=date(2026, 5, 10),
        place=place(LAT, LON, uncertainty_m=30.0),
        reporter="ivy",
        why=Why.LOT,
        arrived_at=datetime(2026, 5, 11, tzinfo=UTC),
        knowable_from=NOW,
        digest=found.digest,
        paddock="p1",
        postcode="9001",
        crop="canola",
        stage=12,
        stage_scale="BBCH",
        count=3.5,
        unit="per_100cm2",
        units_sampled=20,
        method="quadrat",
        damage="silvered leaves",
        plants_per_m2=40.0,
        row_spacing_m=0.3,
        confidence="fairly sure",
        spot_counts=(3.0, 0.0, 7.5),
        units_per_spot=5,
        spot_at=("edge", "middle", "middle"),
        trap="t1",
        lure="none",
        nights=2,
        serviced_on=date(2026, 5, 9),
        beneficials="ladybirds",
        treated_group="3A",
        treated_on=date(2026, 5, 1),
        note="mostly <5 a spot near the gate",
    )
    assert found == wanted
    assert content_digest(found) == found.digest


@pytest.mark.parametrize("name", ["RLEM", "Red-Legged  Earth Mite", "halotydeus destructor", "redlegged earth mites"])
def test_a_pest_is_known_by_any_of_its_names(store: Store, tmp_path: Path, name: str) -> None:
    settle(store)
    take(store, write(tmp_path, [row(pest=name)]))
    assert [found.pest for found in all_of(store)] == ["redlegged_earth_mite"]


def test_the_code_of_a_pest_is_one_of_its_names(store: Store, tmp_path: Path) -> None:
    settle(store)
    take(store, write(tmp_path, [row(pest="agroyp")]))
    assert [found.pest for found in all_of(store)] == ["cutworms"]


def test_a_place_is_its_position_or_its_paddock_or_its_postcode(store: Store, tmp_path: Path) -> None:
    settle(store)
    nowhere = {"latitude": "", "longitude": ""}
    rows = [
        row(record_id="1", paddock="p1"),
        row(record_id="2", paddock="p1", postcode="9001", **nowhere),
        row(record_id="3", postcode="9001", **nowhere),
    ]
    take(store, write(tmp_path, rows))
    position, paddock, postcode = all_of(store)
    assert position.place == place(LAT, LON)
    assert paddock.place == place(LAT + 0.1, LON, elevation_m=10.0)
    assert postcode.place == place(LAT, LON, uncertainty_m=20_000.0)  # our choice: as wide as a rural postcode
    assert {content_digest(each) == each.digest for each in (position, paddock, postcode)} == {True}


def test_a_district_is_told_by_paddock_row_postcode_or_file(store: Store, tmp_path: Path) -> None:
    settle(store, south=True)
    south = {"latitude": "-60", "longitude": str(LON)}
    nowhere = {"latitude": "", "longitude": ""}
    rows = [
        row(record_id="1", paddock="p1"),
        row(record_id="2", district="south", **south),
        row(record_id="3", postcode="9001", **nowhere),
        row(record_id="4", **south),
    ]
    assert take(store, write(tmp_path, rows), district="south")["new"] == 4
    assert [each.key for each in all_of(store, "north")] == ["csv:1", "csv:3"]
    assert [each.key for each in all_of(store, "south")] == ["csv:2", "csv:4"]


def test_a_district_that_no_row_tells_is_asked_for(store: Store, tmp_path: Path) -> None:
    settle(store, south=True)
    with pytest.raises(BadInput, match="--district"):
        take(store, write(tmp_path, [row()]))
    with pytest.raises(NotFound, match="there is: north, south"):
        take(store, write(tmp_path, [row()]), district="east")


# --- once --------------------------------------------------------------------------------------


def test_taking_a_file_again_changes_nothing(store: Store, tmp_path: Path) -> None:
    settle(store)
    path = write(tmp_path, [row(record_id=str(n)) for n in range(120)])
    assert take(store, path) == NONE | {"new": 120}
    before = all_of(store)
    later = SetClock(NOW + timedelta(days=1))
    assert take(store, path, clock=later) == NONE | {"same": 120}
    assert all_of(store) == before


def test_the_name_of_the_file_is_no_part_of_a_key_and_the_source_is(store: Store, tmp_path: Path) -> None:
    settle(store)
    take(store, write(tmp_path, [row()], "a.csv"))
    assert take(store, write(tmp_path, [row()], "b.csv"))["same"] == 1
    assert take(store, write(tmp_path, [row()]), source="phone")["new"] == 1
    assert take(store, write(tmp_path, [row(source="radio")]))["new"] == 1
    assert [each.key for each in all_of(store)] == ["csv:1", "phone:1", "radio:1"]
    with pytest.raises(BadInput, match="source 'a:b'"):
        take(store, write(tmp_path, [row()]), source="a:b")


def test_identical_rows_without_a_record_id_are_told_apart_by_their_order(store: Store, tmp_path: Path) -> None:
    settle(store)
    nameless = row(record_id="")
    one, two = [nameless, row(record_id="", note="x")], [nameless, row(record_id="", note="x"), nameless]
    assert take(store, write(tmp_path, one))["new"] == 2
    assert take(store, write(tmp_path, two)) == NONE | {"new": 1, "same": 2}
    assert take(store, write(tmp_path, two)) == NONE | {"same": 3}
    same = [each for each in all_of(store) if each.note is None]
    assert same[0].key.removesuffix(".1") == same[1].key.removesuffix(".2")


def test_a_changed_row_is_refused_and_named_or_made_the_next_version(store: Store, tmp_path: Path) -> None:
    settle(store)
    take(store, write(tmp_path, [row(), row(record_id="2")]))
    changed = write(tmp_path, [row(), row(record_id="2", status="absent"), row(record_id="3")])
    with pytest.raises(RowsRefused) as refused:
        take(store, changed)
    [refusal] = refused.value.refusals
    assert (refusal.row, refusal.field, refusal.value) == (3, "record_id", "2")
    assert "--revise" in refusal.remedy
    assert len(all_of(store)) == 2
    later = SetClock(NOW + timedelta(days=1))
    assert take(store, changed, clock=later, revise=True) == NONE | {"new": 1, "revised": 1, "same": 1}
    assert [each.version for each in all_of(store)] == [1, 1]  # as it was known before
    with store.reading() as c:
        now = observations.read(c, "north", later.now())
    assert [(each.key, each.version, each.present) for each in now] == [
        ("csv:1", 1, True),
        ("csv:2", 2, False),
        ("csv:3", 1, True),
    ]
    assert take(store, changed) == NONE | {"same": 3}


def test_a_record_id_that_stands_twice_must_say_the_same(store: Store, tmp_path: Path) -> None:
    settle(store)
    assert take(store, write(tmp_path, [row(), row()])) == NONE | {"new": 1, "same": 1}
    with pytest.raises(RowsRefused) as refused:
        take(store, write(tmp_path, [row(record_id="9"), row(record_id="9", note="x"), row(record_id="9")]))
    assert [(each.row, each.value) for each in refused.value.refusals] == [(3, "9")]
    assert "row 2" in refused.value.refusals[0].remedy


# --- all or nothing, or the good ones ----------------------------------------------------------


def test_one_bad_row_stops_the_file_and_every_bad_row_is_named(store: Store, tmp_path: Path) -> None:
    settle(store)
    rows = [row(), row(record_id="2", day="2026-02-30"), row(record_id="3", reporter="bob", count="5")]
    with pytest.raises(RowsRefused, match=r"nothing was taken from observations\.csv: 2 to mend") as refused:
        take(store, write(tmp_path, rows))
    assert [(each.row, each.field) for each in refused.value.refusals] == [(3, "day"), (4, "reporter")]
    assert all_of(store) == []


def test_the_good_rows_alone_leave_a_file_to_mend_and_take(store: Store, tmp_path: Path) -> None:
    settle(store)
    take(store, write(tmp_path, [row(record_id="0")]))
    text = "record_id,day,latitude,longitude,pest,status,reporter,note\n"
    text += '0,2026-05-10,-46,100,RLEM,absent,ivy,changed\n1,2026-05-10,-46,100,RLEM,present,ivy,"a, b"\n'
    text += '2,2026-05-10,"-46,5",100,RLEM,present,ivy,=1+1\n3,2026-05-10,-46,100\n'
    rest = tmp_path / "rest.csv"
    counts = take(store, write(tmp_path, text), keep_good=rest)
    assert counts == NONE | {"new": 1, "refused": 3}
    assert rest.read_text().splitlines() == [
        "record_id,day,latitude,longitude,pest,status,reporter,note",
        "0,2026-05-10,-46,100,RLEM,absent,ivy,changed",
        '2,2026-05-10,"-46,5",100,RLEM,present,ivy,\'=1+1',
        "3,2026-05-10,-46,100",
    ]
    reasons = json.loads(reasons_path(rest).read_text())
    assert [(each["row_here"], each["row"], each["field"]) for each in reasons] == [
        (2, 2, "record_id"),
        (3, 4, "latitude"),
        (3, 4, "note"),
        (4, 5, "(row)"),
    ]
    mended = rest.read_text().replace('"-46,5"', "-46.5").replace("absent,ivy,changed", "present,ivy,")
    mended = mended.replace("3,2026-05-10,-46,100", "3,2026-05-10,-46,100,RLEM,absent,ada,")
    assert take(store, write(tmp_path, mended, "mended.csv")) == NONE | {"new": 2, "same": 1}


def test_rows_that_are_being_mended_are_not_written_over(store: Store, tmp_path: Path) -> None:
    settle(store)
    path, rest = write(tmp_path, [row(), row(record_id="2", day="x")]), tmp_path / "rest.csv"
    take(store, path, keep_good=rest)
    assert take(store, path, keep_good=rest) == NONE | {"same": 1, "refused": 1}  # the same file again
    rest.write_text(rest.read_text().replace(",x,", ",2026-05-10,"))
    with pytest.raises(BadInput, match="is there already"):
        take(store, write(tmp_path, [row(record_id="3"), row(record_id="4", day="x")]), keep_good=rest)
    assert len(all_of(store)) == 1
    with pytest.raises(BadInput, match="another name"):
        take(store, path, keep_good=path)


def test_no_file_is_left_where_nothing_was_refused(store: Store, tmp_path: Path) -> None:
    settle(store)
    take(store, write(tmp_path, [row()]), keep_good=tmp_path / "rest.csv")
    assert [each.name for each in tmp_path.glob("*.csv*")] == ["observations.csv"]


def test_a_column_that_only_some_blocks_of_rows_fill_is_whole(
    store: Store, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Rows are checked in blocks; here in blocks of two, so that a small file has several."""
    monkeypatch.setattr(csv_file, "BLOCK", 2)
    settle(store)
    rows = [row(record_id=str(n), why="", note="", arrived_at="") for n in range(5)]
    rows[2] |= {"why": "asked", "arrived_at": "2026-05-11T00:00Z", "note": "here"}
    rows[4] |= {"record_id": ""}
    rows.append(rows[4])
    assert take(store, write(tmp_path, rows))["new"] == 6
    found = {each.key: each for each in all_of(store)}
    assert [key for key, each in found.items() if each.why == Why.ASKED] == ["csv:2"]
    assert [key for key, each in found.items() if each.arrived_at == datetime(2026, 5, 11, tzinfo=UTC)] == ["csv:2"]
    assert {each.arrived_at for key, each in found.items() if key != "csv:2"} == {NOW}
    assert all(content_digest(each) == each.digest for each in found.values())


def test_a_large_file_is_checked_by_two_processes_to_the_same_end(
    store: Store, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    settle(store)
    rows = [row(record_id=f"{n:02d}", note=f"row {n}") for n in range(20)]
    rows[2]["day"] = rows[18]["day"] = "2026-02-30"
    path = write(tmp_path, rows)
    with pytest.raises(RowsRefused) as whole:
        take(store, path)
    monkeypatch.setattr(checking, "LARGE", 10)
    with pytest.raises(RowsRefused) as halved:
        take(store, path)
    assert whole.value.refusals == halved.value.refusals
    assert [each.row for each in halved.value.refusals] == [4, 20]
    assert take(store, path, keep_good=tmp_path / "rest.csv") == NONE | {"new": 18, "refused": 2}
    monkeypatch.setattr(checking, "LARGE", 10**9)
    assert take(store, path, keep_good=tmp_path / "rest.csv") == NONE | {"same": 18, "refused": 2}
    assert all(content_digest(each) == each.digest for each in all_of(store))


def test_a_large_file_is_taken_where_no_second_process_can_work(
    store: Store, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(checking, "LARGE", 10)
    monkeypatch.setattr(checking.sys, "executable", "/bin/false")
    settle(store)
    assert take(store, write(tmp_path, [row(record_id=str(n)) for n in range(5)]))["new"] == 5


def test_a_large_file_with_rows_without_a_record_id_is_checked_in_one(
    store: Store, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The ordinals of identical rows run through the whole file."""
    monkeypatch.setattr(checking, "LARGE", 4)
    settle(store)
    assert take(store, write(tmp_path, [row(record_id=" ")] * 8))["new"] == 8


# --- past seasons ------------------------------------------------------------------------------


def test_history_is_knowable_from_its_own_dates(store: Store, tmp_path: Path) -> None:
    settle(store)
    rows = [
        row(record_id="1", day="2025-05-10", arrived_at="2025-05-12T00:00Z"),
        row(record_id="2", day="2025-05-10"),
        row(record_id="3", day="2026-05-11"),
    ]
    assert take(store, write(tmp_path, rows), history=True)["new"] == 3
    stated, assumed, recent = all_of(store)
    assert (stated.knowable_from, stated.arrival_assumed) == (datetime(2025, 5, 12, tzinfo=UTC), False)
    # The day ends at 24:00 in Adelaide, UTC+9:30 in May: 14:30 UTC; three days later it may be known.
    assert (assumed.knowable_from, assumed.arrival_assumed) == (datetime(2025, 5, 13, 14, 30, tzinfo=UTC), True)
    assert (recent.knowable_from, recent.arrived_at) == (NOW, NOW)  # never after it was taken
    assert all(each.history for each in (stated, assumed, recent))
    assert all(each.arrived_at == each.knowable_from for each in (stated, assumed, recent))


def test_a_change_to_history_does_not_change_what_was_known(store: Store, tmp_path: Path) -> None:
    settle(store)
    take(store, write(tmp_path, [row(day="2025-05-10"), row(record_id="2", day="2025-05-10")]), history=True)
    changed = write(tmp_path, [row(day="2025-05-10", note="x"), row(record_id="3", day="2025-05-10")])
    later = SetClock(NOW + timedelta(days=1))
    assert take(store, changed, history=True, revise=True, clock=later) == NONE | {"new": 1, "revised": 1}
    with store.reading() as c:
        first, second = (observations.get(c, "csv:1", version) for version in (1, 2))
        third = observations.get(c, "csv:3", 1)
    assert first is not None
    assert second is not None
    assert third is not None
    assert (first.knowable_from, second.knowable_from) == (third.knowable_from, later.now())
    assert (second.note, second.version) == ("x", 2)


def test_progress_is_told_in_rows(store: Store, tmp_path: Path) -> None:
    settle(store)
    told: list[tuple[int, int | None, str]] = []
    path = write(tmp_path, [row(record_id=str(n)) for n in range(3)])
    take(store, path, progress=lambda *at: told.append(at), clock=CLOCK)
    assert told == [(4, 4, "rows checked")]
