"""Files are told apart by their ending and columns; one that fits nothing says what would."""

import codecs
from pathlib import Path

import pytest

from service.errors import BadInput
from service.intake.kinds import NETWORK, REQUIRED, kind_of

HEADERS = {
    "observations": "day,pest,status,reporter,latitude,longitude",
    "station_days": "station,day,tmin,tmax,rain,arrived_at",
    **{name: ",".join(columns.required + columns.optional) for name, columns in NETWORK.items()},
}


def a_file(folder: Path, header: str, name: str = "file.csv") -> Path:
    path = folder / name
    path.write_bytes(header.encode())
    return path


@pytest.mark.parametrize("kind", sorted(REQUIRED))
def test_each_kind_is_known_by_all_its_columns_and_by_the_required_ones_alone(kind: str, tmp_path: Path) -> None:
    assert kind_of(a_file(tmp_path, HEADERS[kind])) == kind
    assert kind_of(a_file(tmp_path, ",".join(reversed(REQUIRED[kind])))) == kind


def test_a_district_is_known_by_its_ending(tmp_path: Path) -> None:
    assert kind_of(tmp_path / "anything.TOML") == "district"


def test_spaces_capitals_and_marks_of_encoding_do_not_matter(tmp_path: Path) -> None:
    header = " Station , DAY,rain\n"
    path = tmp_path / "from_a_spreadsheet.CSV"
    for raw in (codecs.BOM_UTF8 + header.encode(), header.encode("utf-16")):
        path.write_bytes(raw)
        assert kind_of(path) == "station_days"


def test_a_column_nobody_knows_does_not_hide_the_kind(tmp_path: Path) -> None:
    assert kind_of(a_file(tmp_path, HEADERS["holdings"] + ",shoe_size")) == "holdings"


def test_what_fits_nothing_is_told_every_kind_and_the_nearest(tmp_path: Path) -> None:
    with pytest.raises(BadInput) as caught:
        kind_of(a_file(tmp_path, "id,district,name,latitude,longitude_deg,elevation_m"))
    words = str(caught.value)
    assert "nearest to stations, which also needs: longitude" in words
    for kind, required in REQUIRED.items():
        assert f"{kind}: {','.join(required)}" in words


@pytest.mark.parametrize("name", ["sheet.xlsx", "notes", "data.json"])
def test_another_ending_is_refused_with_the_choices(name: str, tmp_path: Path) -> None:
    with pytest.raises(BadInput, match="paddocks: id,holding,district"):
        kind_of(a_file(tmp_path, "id,name", name))


def test_a_file_that_could_be_two_kinds_is_refused(tmp_path: Path) -> None:
    with pytest.raises(BadInput, match="could be holdings or people"):
        kind_of(a_file(tmp_path, "id,district,name,registered_on,roles"))


def test_a_file_that_is_not_there_or_empty_is_refused(tmp_path: Path) -> None:
    with pytest.raises(BadInput, match="can't be read"):
        kind_of(tmp_path / "none.csv")
    with pytest.raises(BadInput, match="fits no kind"):
        kind_of(a_file(tmp_path, ""))


@pytest.mark.parametrize(
    "header",
    [
        'station,day,"tmin"\n',  # a quotation mark at the very end of the line
        '"station","day\n",tmin\n',  # a name over two lines
        "station,day,tmin\r\n",
        "\ufeffstation,day,tmin\n",
        "station,day,tmin",
    ],
)
def test_a_header_is_read_whole_whatever_its_first_line_looks_like(tmp_path: Path, header: str) -> None:
    path = tmp_path / "days.csv"
    path.write_bytes(header.encode())
    assert kind_of(path) == "station_days"
