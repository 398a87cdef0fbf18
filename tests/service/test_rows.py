"""Rows of a table: which files can be read, and how each cell that can't be used is named."""

import codecs
from datetime import UTC, date, datetime
from pathlib import Path

import pytest

from service import rows
from service.errors import BadInput
from service.rows import Row


def read(folder: Path, content: str | bytes) -> list[Row]:
    path = folder / "file.csv"
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return rows.read(path, ("id",), ("name",))


@pytest.mark.parametrize(
    "raw",
    [
        "id,name\nh1,Küste\n".encode(),
        codecs.BOM_UTF8 + "id,name\r\nh1,Küste\r\n".encode(),
        "id,name\nh1,Küste\n".encode("utf-16"),
        codecs.BOM_UTF16_BE + "ID , Name\nh1,Küste".encode("utf-16-be"),
        'id,name\n"h1","Küste"\n\n,\n'.encode(),
    ],
)
def test_a_file_is_read_in_whichever_encoding_spreadsheets_write(raw: bytes, tmp_path: Path) -> None:
    (row,) = read(tmp_path, raw)
    assert (row.number, row.cells) == (2, {"id": "h1", "name": "Küste"})


def test_rows_are_counted_as_a_spreadsheet_counts_them(tmp_path: Path) -> None:
    found = read(tmp_path, 'id,name\nh1,a\n\nh2,"two\nlines"\nh3,c\n')
    assert [row.number for row in found] == [2, 4, 5]


def test_columns_without_a_name_are_left_out_if_they_are_empty(tmp_path: Path) -> None:
    good, bad = read(tmp_path, "id,name,\nh1,a,\nh2,b,lost\n")
    assert good.refusals == []
    assert "without a name" in bad.refusals[0].remedy


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"id,name\nh1,K\xfcste\n", "line 2: not UTF-8"),
        ("id,name\nh1,a\n".encode("utf-16-le"), "zero bytes"),
        ("id;name\nh1;a\n", "not separated by commas"),
        ("id\tname\nh1\ta\n", "not separated by commas"),
        ("id,nmae\nh1,a\n", "did you mean name"),
        ("id,name,id\nh1,a,h2\n", "twice"),
        ("name\na\n", "missing; add it"),
        ("id,name\n", "no rows"),
        ("", "missing; add it"),
        ('id,name\nh1,"open\n', "quotation marks"),
        ("id,name\nh1," + "x" * 200_000, "field larger than"),
    ],
)
def test_a_file_that_can_not_be_read_says_what_to_mend(content: str | bytes, words: str, tmp_path: Path) -> None:
    with pytest.raises(BadInput, match=words):
        read(tmp_path, content)


def test_a_row_of_another_length_is_refused_by_its_number(tmp_path: Path) -> None:
    short, long, good = read(tmp_path, "id,name\nh1\nh2,a,b\nh3,c\n")
    assert "has 1 cells for 2" in short.refusals[0].remedy
    assert "has 3 cells for 2" in long.refusals[0].remedy
    assert good.refusals == []
    with pytest.raises(BadInput, match=r"2 to mend\. First: row 2") as caught:
        rows.finish(tmp_path / "file.csv", [short, long, good])
    assert len(caught.value.refusals) == 2


@pytest.mark.parametrize("value", ["=1+1", "+61 400", "-x", "@sum", "<b>x</b>", "a\nb", "a\rb", "a\tb", "a\u2028b"])
def test_text_that_could_harm_a_reader_of_it_is_refused(value: str) -> None:
    row = Row(2, {"name": value})
    assert row.text("name") is None
    assert (row.refusals[0].field, row.refusals[0].value) == ("name", value)


@pytest.mark.parametrize("value", ["a\u202eb", "\u2066x", "nul\x00", "x" * 501])
def test_text_that_hides_what_it_says_is_refused(value: str) -> None:
    row = Row(2, {"name": value})
    assert row.text("name") is None
    assert len(row.refusals) == 1


@pytest.mark.parametrize("value", ["Ōtara & Söhne", "O'Brien", "north-west (old)", "雨", "Naïve\u00a0Bank", "x" * 500])
def test_names_of_people_and_places_are_taken(value: str) -> None:
    row = Row(2, {"name": f"  {value} "})
    assert row.text("name") == value
    assert row.refusals == []


@pytest.mark.parametrize(
    "value",
    ["ivy@example.org", "ivy.o'brien+pests@mail.example.co.uk", "a@b.io", "i_v-y@ex-ample.org", "x" * 64 + "@b.io"],
)
def test_an_address_is_taken(value: str) -> None:
    row = Row(2, {"email": value})
    assert row.email("email") == value


@pytest.mark.parametrize(
    "value",
    [
        "ivy",
        "ivy@",
        "@example.org",
        "ivy@example",
        "ivy@@example.org",
        "ivy@example..org",
        "i..vy@example.org",
        ".ivy@example.org",
        "ivy.@example.org",
        "ivy@-example.org",
        "ivy example@example.org",
        "ivy@example.org,tom@example.org",
        "ivy@example.org;tom@example.org",
        "ivy@example.org\nBcc: all@example.org",
        "ivy@example.org\r\nBcc: all@example.org",
        "ivy\n@example.org",
        "Ivy <ivy@example.org>",
        "ivy@exämple.org",
        "=cmd@example.org",
        "x" * 65 + "@b.io",
        "a@" + "b" * 64 + ".io",
        "a@" + "b.c" * 90 + ".io",
    ],
)
def test_what_is_not_one_plain_address_is_refused(value: str) -> None:
    row = Row(2, {"email": value})
    assert row.email("email") is None
    assert [(refusal.row, refusal.field) for refusal in row.refusals] == [(2, "email")]


def test_cells_of_each_type() -> None:
    row = Row(
        2,
        {
            "n": " 4.5 ",
            "whole": "4.0",
            "day": "2026-05-04",
            "yes": "Yes",
            "no": "NO",
            "many": "a; b;;a",
            "word": "Grower",
            "at": "2026-05-04T09:30+09:30",
            "id": "h-1.x_Y",
            "empty": "  ",
        },
    )
    assert (row.number_in("n", 0, 5), row.whole("whole", 1, 4), row.day("day")) == (4.5, 4, date(2026, 5, 4))
    assert (row.yes_no("yes"), row.yes_no("no"), row.yes_no("empty")) == (True, False, None)
    assert (row.several("many"), row.several("empty")) == (("a", "b"), ())
    assert (row.choice("word", ("grower",)), row.id("id")) == ("grower", "h-1.x_Y")
    assert row.moment("at") == datetime(2026, 5, 4, 0, 0, tzinfo=UTC)
    assert (row.text("empty"), row.number_in("empty", 0, 1), row.day("empty"), row.moment("none")) == (None,) * 4
    assert row.refusals == []


def test_cells_that_do_not_fit_are_refused_with_a_remedy() -> None:
    row = Row(
        7,
        {
            "n": "5.01",
            "half": "4.5",
            "day": "2026-5-4",
            "feb": "2026-02-30",
            "yes": "si",
            "word": "growr",
            "at": "2026-05-04T09:30",
            "id": "a b",
            "needed": "",
        },
    )
    given = [
        *(row.number_in("n", 0, 5), row.whole("half", 1, 9), row.day("day"), row.day("feb"), row.yes_no("yes")),
        *(row.choice("word", ("grower",)), row.moment("at"), row.id("id"), row.text("needed", needed=True)),
    ]
    assert given == [None] * 9
    fields = ["n", "half", "day", "feb", "yes", "word", "at", "id", "needed"]
    assert [(refusal.row, refusal.field) for refusal in row.refusals] == [(7, name) for name in fields]
    assert "did you mean grower" in row.refusals[5].remedy


def test_the_same_key_twice_names_the_first_row() -> None:
    table = [Row(number, {"id": id}) for number, id in ((2, "a"), (3, "b"), (4, "a"), (5, "a"))]
    rows.once(table, lambda row: row.given("id"), "id")
    assert [len(row.refusals) for row in table] == [0, 0, 1, 1]
    assert "row 2" in table[3].refusals[0].remedy
