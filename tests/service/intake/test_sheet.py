"""The quick way to read a file and the careful one see the same cells, with the same row numbers."""

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from service.errors import BadInput
from service.intake import sheet

HEADER = ["day", "pest", "status", "reporter", "paddock"]
CELL = st.text(st.sampled_from(list("ab ü-'\t;.")), max_size=4)


def _file(folder: Path, text: str) -> Path:
    path = folder / "observations.csv"
    path.write_text(text, encoding="utf-8", newline="")
    return path


def _same(one: sheet.Sheet, other: sheet.Sheet) -> None:
    assert one.columns.to_pylist() == other.columns.to_pylist()
    assert one.numbers.tolist() == other.numbers.tolist()
    assert one.misfits == other.misfits


@settings(max_examples=60, deadline=None)
@given(
    rows=st.lists(st.lists(CELL, min_size=5, max_size=5), min_size=1, max_size=8), end=st.sampled_from(["\n", "\r\n"])
)
def test_regular_files_read_alike_both_ways(
    tmp_path_factory: pytest.TempPathFactory, rows: list[list[str]], end: str
) -> None:
    text = end.join(",".join(row) for row in [HEADER, *(["x", *row[1:]] for row in rows)]) + end
    quick = sheet._regular(Path("observations.csv"), text.encode())
    careful = sheet._irregular(Path("observations.csv"), text)
    assert quick is not None
    _same(quick, careful)
    _same(sheet.read(_file(tmp_path_factory.mktemp("sheet"), text)), careful)


def test_quotation_marks_and_odd_rows_take_the_careful_way(tmp_path: Path) -> None:
    text = ",".join(HEADER) + '\n2026-05-10,"a, ""b""\nc",present,ivy,p1\n\nshort,row\n,,,,\n1,2,3,4,5\n'
    read = sheet.read(_file(tmp_path, text))
    # Rows as a spreadsheet counts them: a cell over two lines is in one row, an empty line is a row.
    assert read.columns["pest"].to_pylist() == ['a, "b"\nc', "", "2"]
    assert read.numbers.tolist() == [2, 5, 6]
    assert [(misfit.number, misfit.cells) for misfit in read.misfits] == [(4, ["short", "row"])]


def test_a_row_of_another_length_far_down_is_found(tmp_path: Path) -> None:
    rows = ["2026-05-10,RLEM,absent,ivy,p1"] * 50_000
    rows[40_000] += ",more"
    read = sheet.read(_file(tmp_path, "\n".join([",".join(HEADER), *rows])))
    assert [misfit.number for misfit in read.misfits] == [40_002]
    assert len(read.numbers) == 49_999


def test_a_file_with_rows_that_are_all_odd_is_still_a_file(tmp_path: Path) -> None:
    assert len(sheet.read(_file(tmp_path, ",".join(HEADER) + "\nx\n")).misfits) == 1
    for text in (",".join(HEADER) + "\n", ",".join(HEADER) + "\n\n\n"):
        with pytest.raises(BadInput, match="a header and no rows"):
            sheet.read(_file(tmp_path, text))
