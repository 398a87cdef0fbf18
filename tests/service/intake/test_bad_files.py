"""Files as they come: each bad one is refused with row, field and remedy, and leaves the store as it was."""

import codecs
import re
from pathlib import Path

import pytest

from rules.records import Refusal
from service.errors import BadInput, NotFound
from service.intake import csv_file
from service.store import network
from service.store.base import Store
from tests.builders import LAT, LON, a_district
from tests.service.intake.network import CLOCK, SINCE, all_of, csv_of, row, settle, take, write

TEXT = csv_of([row(note="ünder")])


def refused(store: Store, path: Path) -> BadInput:
    """The refusal of a file; nothing of it is in the store."""
    settle(store)
    with pytest.raises(BadInput) as error:
        take(store, path)
    assert all_of(store) == []
    return error.value


def one_refusal(store: Store, path: Path) -> Refusal:
    refusals = refused(store, path).refusals
    assert len(refusals) == 1, refusals
    return refusals[0]


# --- the file as a whole -----------------------------------------------------------------------


@pytest.mark.parametrize(
    "raw",
    [
        pytest.param(TEXT.encode("utf-8-sig"), id="utf-8 with its mark"),
        pytest.param(codecs.BOM_UTF16_LE + TEXT.encode("utf-16-le"), id="utf-16 little-endian"),
        pytest.param(codecs.BOM_UTF16_BE + TEXT.encode("utf-16-be"), id="utf-16 big-endian"),
        pytest.param(TEXT.replace("\n", "\r\n").encode(), id="lines ended by CR LF"),
        pytest.param(TEXT.replace("\n", "\r").encode(), id="lines ended by CR"),
        pytest.param(TEXT.rstrip("\n").encode(), id="no end of the last line"),
        pytest.param((TEXT + ",,,,,,,\n\n").encode(), id="empty rows at the end"),
        pytest.param(TEXT.replace("day", " Day ").encode(), id="spaces and capitals in the header"),
    ],
)
def test_what_can_be_read_without_guessing_is_taken(store: Store, tmp_path: Path, raw: bytes) -> None:
    settle(store)
    path = tmp_path / "observations.csv"
    path.write_bytes(raw)
    assert take(store, path)["new"] == 1
    assert [found.note for found in all_of(store)] == ["ünder"]


@pytest.mark.parametrize(
    ("raw", "words"),
    [
        pytest.param(TEXT.encode("latin-1"), r"line 2: not UTF-8 text\. Save the file as 'CSV UTF-8'", id="latin-1"),
        pytest.param(TEXT.encode("utf-16-le"), "Save the file as 'CSV UTF-8'", id="utf-16 without its mark"),
        pytest.param(TEXT.replace("ivy", "i\0vy").encode(), "zero bytes", id="NUL"),
        pytest.param(b"", "is empty; its first row must name the columns", id="empty"),
        pytest.param(b"\n\n", "is empty; its first row must name the columns", id="empty lines"),
        pytest.param(TEXT.splitlines()[0].encode(), "a header and no rows", id="only a header"),
        pytest.param(TEXT.replace(",", ";").encode(), "not separated by commas", id="semicolons"),
        pytest.param(TEXT.replace(",", "\t").encode(), "not separated by commas", id="tabs"),
        pytest.param(TEXT.replace("ünder", '"ünder').encode(), "row 2.*never closed", id="unclosed quotation mark"),
        pytest.param(TEXT.replace("ünder", '"ü"x').encode(), "row 2.*mend that row", id="text after a quotation mark"),
        pytest.param((TEXT + '"' + "x" * 10_000_000).encode(), "row 3.*too long; mend", id="a cell of 10 MB in quotes"),
    ],
)
def test_what_is_no_table_is_refused_with_the_remedy(store: Store, tmp_path: Path, raw: bytes, words: str) -> None:
    path = tmp_path / "observations.csv"
    path.write_bytes(raw)
    assert re.search(words, str(refused(store, path)))


def test_a_file_that_is_not_there_is_named(store: Store, tmp_path: Path) -> None:
    assert "can't be read" in str(refused(store, tmp_path / "nothing.csv"))


def test_a_line_of_10_mb_is_refused_by_its_row(store: Store, tmp_path: Path) -> None:
    path = write(tmp_path, TEXT + TEXT.splitlines()[1].replace("ünder", "x" * 10_000_000) + "\n")
    found = refused(store, path)
    assert "row 3" in str(found)
    assert len(str(found)) < 1000


# --- the header --------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("header", "field", "remedy"),
    [
        ("day,pest,status,reporter,paddock,day", "day", "this column is there twice; keep one"),
        ("day,pest,status,paddock", "reporter", "this column is missing; add it"),
        ("day,pest,status,reporter", "latitude", "add the columns latitude and longitude, or paddock, or postcode"),
        (
            "day,pest,status,reporter,latitude",
            "latitude",
            "add the columns latitude and longitude, or paddock, or postcode",
        ),
        ("day,pest,status,reporter,padock,postcode", "padock", "there is no such column (did you mean paddock?)"),
    ],
)
def test_a_header_that_does_not_fit_is_refused_by_column(
    store: Store, tmp_path: Path, header: str, field: str, remedy: str
) -> None:
    refusal = one_refusal(store, write(tmp_path, header + "\n" + "x," * header.count(",") + "x\n"))
    assert (refusal.row, refusal.field, refusal.remedy) == (1, field, remedy)


# --- rows --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("line", "words"),
    [
        ("3,2026-05-10,-46,100,RLEM,present\n", "has 6 cells for 8 columns"),
        ("3,2026-05-10,-46,5,100,RLEM,present,ivy,\n", "has 9 cells for 8 columns"),
    ],
)
def test_short_and_long_rows_are_refused_by_number(store: Store, tmp_path: Path, line: str, words: str) -> None:
    refusal = one_refusal(store, write(tmp_path, TEXT + line))
    assert (refusal.row, refusal.field) == (3, "(row)")
    assert words in refusal.remedy


BAD_CELLS = [
    # Positions
    ({"latitude": str(LON), "longitude": str(LAT)}, "latitude", "write a number from -90 to 90"),
    ({"latitude": "46"}, "latitude", "south of the equator is negative; write -46"),
    ({"longitude": "-100"}, "latitude", "the sign of the longitude looks wrong: write 100"),
    ({"latitude": "0", "longitude": "0"}, "latitude", "what a phone writes without a position"),
    ({"latitude": "-40"}, "latitude", "lies 667 km from the middle of North Bank"),  # 6° of 111.195 km
    ({"longitude": ""}, "latitude", "give latitude and longitude, or neither"),
    ({"latitude": "", "longitude": ""}, "latitude", "give latitude and longitude, a paddock or a postcode"),
    ({"latitude": "NaN"}, "latitude", "write a number from -90 to 90, in digits"),
    ({"latitude": "-inf"}, "latitude", "write a number from -90 to 90, in digits"),
    # Days
    ({"day": "2026-05-13"}, "day", "lies in the future"),  # it is the 12th in Adelaide
    ({"day": "2026-02-30"}, "day", "there is no such day in the calendar"),
    ({"day": "0226-05-10"}, "day", "check the year"),
    ({"day": "03/04/2026"}, "day", "write it as 2026-03-04 or 2026-04-03, whichever is meant"),
    ({"day": "23/04/2026"}, "day", "write it as 2026-04-23, whichever is meant"),
    ({"day": "May 10"}, "day", "write the day as YYYY-MM-DD"),
    ({"treated_on": "2026-06-01"}, "treated_on", "lies in the future"),
    ({"arrived_at": "2026-05-11T10:00"}, "arrived_at", "write the time with its offset"),
    ({"arrived_at": "2026-06-01T00:00Z"}, "arrived_at", "lies in the future"),
    ({"arrived_at": "2026-05-09T00:00Z"}, "arrived_at", "lies before the day of the observation"),
    # Counts
    ({"count": '"3,5"', "unit": "per_m2"}, "count", "with a point: 3.5"),
    ({"count": "-1", "unit": "per_m2"}, "count", "write a number from 0 to 1e+06"),
    ({"count": "123456789012", "unit": "per_m2"}, "count", "write a number from 0 to 1e+06"),
    ({"count": "nan", "unit": "per_m2"}, "count", "write a number from 0 to 1e+06"),
    ({"count": "1e3", "unit": "per_m2"}, "count", "in digits"),
    ({"count": "3"}, "unit", "a count needs its unit"),
    ({"count": "3", "unit": "per_square_metre"}, "unit", "write one of: per_plant"),
    ({"count": "3", "unit": "per_m2", "status": "absent"}, "status", "says absent, and a count is above 0"),
    ({"count": "0", "unit": "per_m2"}, "status", "says present, and the count is 0"),
    ({"count": "101", "unit": "percent_plants"}, "count", "more than 100 per cent"),
    ({"spot_counts": "1;x", "unit": "per_m2"}, "spot_counts", "write a number from 0"),
    ({"spot_counts": "1;2", "spot_at": "edge", "unit": "per_m2"}, "spot_at", "one word for each of the spot_counts"),
    ({"spot_at": "edge"}, "spot_at", "one word for each of the spot_counts"),
    ({"units_sampled": "2.5"}, "units_sampled", "write a whole number from 1"),
    # Crops and stages
    ({"stage": "12", "stage_scale": "Zadoks", "crop": "lupin"}, "stage_scale", "Zadoks codes are for cereals"),
    ({"stage": "12", "stage_scale": "Zadoks"}, "stage_scale", "Zadoks codes are for cereals"),
    ({"stage": "100"}, "stage", "write a whole number from 0 to 99"),
    ({"crop": "triffid"}, "crop", "there is no crop of that name (there is: barley, "),
    # References
    ({"pest": "redleged earth mite"}, "pest", "did you mean redlegged earth mite?"),
    ({"reporter": "ivi"}, "reporter", "take the people first, or mend it (did you mean ivy?)"),
    ({"paddock": "p9"}, "paddock", "take the paddocks first"),
    ({"postcode": "9999"}, "postcode", "take the postcodes first"),
    ({"district": "west"}, "district", "take the district file first"),
    ({"treated_group": "Anything 500"}, "treated_group", "and no product"),
    # Cells that something else would run, render or break on
    ({"note": "=HYPERLINK(1)"}, "note", "a spreadsheet would run this as a formula; take the = at its start away"),
    ({"note": "+1"}, "note", "take the + at its start away"),
    ({"method": "-1"}, "method", "take the - at its start away"),
    ({"record_id": "@SUM(A1)"}, "record_id", "take the @ at its start away"),
    ({"reporter": "<b>ivy</b>"}, "reporter", "there is no person of that id"),
    ({"note": "<script>x</script>"}, "note", "markup is not taken"),
    ({"reporter": '"ivy\r\nBcc: ada@example.org"'}, "reporter", "there is no person of that id"),
    ({"note": '"one\ntwo"'}, "note", "holds a line break"),
    ({"trap": '"t\r1"'}, "trap", "holds a line break"),
    ({"note": "left \u202e right"}, "note", "an invisible sign"),
    ({"note": "x" * 501}, "note", "shorten it to 500 characters"),
    ({"status": ""}, "status", "is empty; fill it in"),
]  # fmt: skip


def test_each_bad_cell_is_refused_by_row_and_field(store: Store, tmp_path: Path) -> None:
    settle(store)
    names = list(dict.fromkeys(name for changes, *_ in BAD_CELLS for name in row(**changes)))
    rows = [dict.fromkeys(names, "") | row(record_id=str(n)) | changes for n, (changes, *_) in enumerate(BAD_CELLS)]
    with pytest.raises(BadInput) as error:
        take(store, write(tmp_path, rows))
    found = {refusal.row: (refusal.field, refusal.remedy) for refusal in error.value.refusals}
    assert len(error.value.refusals) == len(BAD_CELLS)
    for number, (changes, field, remedy) in enumerate(BAD_CELLS, start=2):
        assert found[number][0] == field, changes
        assert remedy in found[number][1], (changes, found[number])
    assert all_of(store) == []


def test_swapped_coordinates_that_are_on_the_globe_are_named_as_swapped(store: Store, tmp_path: Path) -> None:
    """A district at 46° S, 80° E: both numbers could be latitudes."""
    settle(store, south=True)
    with store.writing() as c:
        network.save_district(c, a_district(id="west", longitude=80.0), SINCE)
    path = write(tmp_path, [row(latitude="80", longitude="-46", district="west")])
    with pytest.raises(BadInput) as error:
        take(store, path)
    assert "latitude and longitude look swapped: write latitude -46, longitude 80" in error.value.refusals[0].remedy


def test_a_paddock_of_another_district_is_refused(store: Store, tmp_path: Path) -> None:
    settle(store, south=True)
    with pytest.raises(BadInput) as error:
        take(store, write(tmp_path, [row(paddock="p1", district="south")]))
    assert [(each.field, each.remedy) for each in error.value.refusals] == [
        ("district", "the paddock or postcode belongs to another district; check both")
    ]


def test_without_a_network_nothing_can_be_taken(store: Store, tmp_path: Path) -> None:
    with pytest.raises(NotFound, match="take a district file first"):
        take(store, write(tmp_path, [row()]))


# --- a file by itself --------------------------------------------------------------------------


def test_a_file_can_be_checked_by_itself(tmp_path: Path) -> None:
    rows = [row(), row(record_id="2", day="2026-02-30"), row(record_id="3", reporter="anyone"), row(record_id="4")]
    good, refusals = csv_file.read(write(tmp_path, csv_of(rows) + "5,2026\n"), CLOCK)
    assert [each.record_id for each in good] == ["1", "3", "4"]
    assert len(good) == 3
    assert good[-1].record_id == good[1:][-1].record_id == "4"
    told = [(each.row, each.field, each.value) for each in refusals]
    assert told == [(3, "day", "2026-02-30"), (6, "(row)", "5,2026")]
