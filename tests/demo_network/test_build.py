"""The files: the same every time, complete, readable by the documented columns, and nowhere near land."""

import filecmp
import tomllib
from collections import Counter
from collections.abc import Iterator
from datetime import datetime, timedelta
from pathlib import Path
from zoneinfo import ZoneInfo

import pytest

from demo_network.build import build
from service.errors import Refused
from tests.demo_network.reading import everywhere, rows

# the columns that the README of `leafturn take` documents for each kind of file
DOCUMENTED = {
    "postcodes": "district,code,name,latitude,longitude,elevation_m",
    "holdings": "id,district,name,registered_on",
    "paddocks": "id,holding,district,name,latitude,longitude,elevation_m,area_ha,crop,sown_on,up_on,last_crop,"
    "pasture_before,capeweed_before,seed_dressing,dressing_group,grazed,flowering,row_spacing_m,plants_per_m2,"
    "enter_leave",
    "people": "id,district,name,email,roles",
    "subscribers": "id,district,email,name,postcode,crops,paddocks,holding,language,consent,person",
    "stations": "id,district,name,latitude,longitude,elevation_m,attribution",
    "station_days": "station,day,tmin,tmax,rain,arrived_at",
    "observations": "record_id,day,latitude,longitude,uncertainty_m,paddock,postcode,district,crop,stage,"
    "stage_scale,pest,status,count,unit,units_sampled,method,damage,plants_per_m2,row_spacing_m,reporter,"
    "confidence,why,spot_counts,units_per_spot,spot_at,trap,lure,nights,serviced_on,beneficials,treated_group,"
    "treated_on,note,arrived_at",
}
# what each cell that refers to another file must be found in: (file, column) -> (file, column)
REFERENCES = {
    ("holdings", "district"): ("postcodes", "district"),
    ("paddocks", "holding"): ("holdings", "id"),
    ("subscribers", "holding"): ("holdings", "id"),
    ("subscribers", "postcode"): ("postcodes", "code"),
    ("subscribers", "paddocks"): ("paddocks", "id"),
    ("subscribers", "person"): ("people", "id"),
    ("observations", "paddock"): ("paddocks", "id"),
    ("observations", "reporter"): ("people", "id"),
    ("station_days", "station"): ("stations", "id"),
}
# open ocean: the nearest land to either box is more than 1,000 km away
BOXES = {"sextant": (-46.5, -45.5, 91.3, 92.7), "lantern": (-44.5, -43.5, 105.3, 106.7)}
ZONES = {"sextant": "Australia/Adelaide", "lantern": "Australia/Perth"}


def test_the_same_seed_writes_the_same_bytes(files: Path, tmp_path: Path) -> None:
    build(tmp_path)
    names = sorted(str(path.relative_to(files)) for path in files.rglob("*") if path.is_file())
    assert names == sorted(str(path.relative_to(tmp_path)) for path in tmp_path.rglob("*") if path.is_file())
    assert filecmp.cmpfiles(files, tmp_path, names, shallow=False) == (names, [], [])


def test_another_seed_writes_another_network(files: Path, tmp_path: Path) -> None:
    build(tmp_path, seed=7)
    assert rows(tmp_path / "network/postcodes.csv") != rows(files / "network/postcodes.csv")


def test_building_again_leaves_nothing_of_the_build_before(files: Path, tmp_path: Path) -> None:
    build(tmp_path, seed=7)
    (tmp_path / "season3/2026-W31").mkdir()
    build(tmp_path)
    assert not (tmp_path / "season3/2026-W31").exists()
    assert rows(tmp_path / "network/postcodes.csv") == rows(files / "network/postcodes.csv")


def test_a_folder_with_somebodys_files_is_refused_and_left_alone(tmp_path: Path) -> None:
    mine = tmp_path / "network/mine.csv"
    mine.parent.mkdir()
    mine.write_text("mine")
    with pytest.raises(Refused, match="empty folder"):
        build(tmp_path)
    assert mine.read_text() == "mine"


def test_an_unknown_event_is_refused_with_those_there_are(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match=r"called blizzard; there are .*hatch"):
        build(tmp_path, without=frozenset({"blizzard"}))


# the sizes that the demo promises: two districts, 40 postcodes, 120 holdings, 400 paddocks, 8 masts,
# 300 readers, and about 6,000 looks over three seasons
@pytest.mark.parametrize(
    ("kind", "count"),
    [("postcodes", 40), ("holdings", 120), ("paddocks", 400), ("stations", 8), ("subscribers", 300)],
)
def test_the_network_has_the_promised_size(files: Path, kind: str, count: int) -> None:
    assert len(rows(files / f"network/{kind}.csv")) == count


def test_the_looks_of_three_seasons_are_about_six_thousand(files: Path) -> None:
    looks = everywhere(files, "observations")
    assert 5_400 < len(looks) < 6_600
    years = Counter(row["day"][:4] for row in looks)
    assert min(years["2024"], years["2025"], years["2026"]) > 1_500
    assert 0.05 < sum(row["status"] == "present" for row in looks) / len(looks) < 0.35


def test_no_row_of_observations_shares_its_id_with_another(files: Path) -> None:
    ids = Counter(row["record_id"] for row in everywhere(files, "observations"))
    assert max(ids.values()) == 1


def test_every_file_has_documented_columns_only(files: Path) -> None:
    seen = set()
    for path in sorted(files.rglob("*.csv")):
        header = path.read_text(encoding="utf-8").splitlines()[0].split(",")
        assert set(header) <= set(DOCUMENTED[path.stem].split(",")), path
        seen.add(path.stem)
    assert seen == set(DOCUMENTED)


@pytest.mark.parametrize(("where", "target"), REFERENCES.items())
def test_every_reference_leads_to_a_row(files: Path, where: tuple[str, str], target: tuple[str, str]) -> None:
    known = {row[target[1]] for row in rows(files / f"network/{target[0]}.csv")}
    named = {name for row in everywhere(files, where[0]) for name in row[where[1]].split(";") if name}
    assert named
    assert named <= known


def test_every_place_lies_in_open_ocean(files: Path) -> None:
    places = list(_places(files))
    assert len(places) > 2_000
    for district, latitude, longitude in places:
        south, north, west, east = BOXES[district]
        assert south < latitude < north, (district, latitude, longitude)
        assert west < longitude < east, (district, latitude, longitude)


def _places(files: Path) -> Iterator[tuple[str, float, float]]:
    for kind in ("postcodes", "paddocks", "stations", "observations"):
        for row in everywhere(files, kind):
            if row["latitude"]:
                yield row["district"], float(row["latitude"]), float(row["longitude"])


def test_districts_differ_in_temperature_type_and_list_two_notifiable_pests(files: Path) -> None:
    text = (files / "network/district.toml").read_text(encoding="utf-8")
    districts = {district["id"]: district for district in tomllib.loads(text)["district"]}
    assert {id: district["temperature_type"] for id, district in districts.items()} == {
        "sextant": "south-eastern",
        "lantern": "western",
    }
    coordinators = {row["id"] for row in rows(files / "network/people.csv") if row["roles"] == "coordinator"}
    for district in districts.values():
        assert district["coordinator"] in coordinators
        assert len(district["reportables"]) == 2


def test_a_weeks_folder_holds_what_came_in_between_two_tuesday_noons(files: Path) -> None:
    folders = sorted((files / "season3").iterdir())
    assert [folder.name for folder in folders] == [f"2026-W{week}" for week in range(10, 31)]
    for number, folder in enumerate(folders):
        for row in rows(folder / "observations.csv"):
            noon = _tuesday_noon(folder.name, row["district"])
            arrived = datetime.fromisoformat(row["arrived_at"])
            assert arrived <= noon
            assert number == 0 or arrived > noon - timedelta(days=7, hours=1)  # one week has an hour more


def _tuesday_noon(week: str, district: str) -> datetime:
    return datetime.strptime(f"{week}-2 12", "%G-W%V-%u %H").replace(tzinfo=ZoneInfo(ZONES[district]))


def test_finds_arrive_sooner_than_looks_that_found_nothing(files: Path) -> None:
    waits: dict[str, list[float]] = {"present": [], "absent": []}
    for row in everywhere(files, "observations"):
        if row["arrived_at"] and not row["trap"]:
            wait = datetime.fromisoformat(row["arrived_at"]).date() - datetime.fromisoformat(row["day"]).date()
            waits[row["status"]].append(wait.days)
    assert sum(waits["present"]) / len(waits["present"]) < 0.7 < 2 < sum(waits["absent"]) / len(waits["absent"])


def test_a_count_by_spots_agrees_with_its_total(files: Path) -> None:
    counted = [row for row in everywhere(files, "observations") if row["spot_counts"]]
    assert len(counted) > 2_000
    for row in counted:
        spots = [float(n) for n in row["spot_counts"].split(";")]
        assert len(spots) == len(row["spot_at"].split(";"))
        assert int(row["units_sampled"]) == len(spots) * int(row["units_per_spot"])
        assert float(row["count"]) == pytest.approx(sum(spots) / int(row["units_sampled"]), abs=0.0006)
        assert (row["status"] == "present") == (sum(spots) > 0)


def test_sowing_of_all_three_seasons_is_recorded(files: Path) -> None:
    for part in ("history/season1", "history/season2", "season3"):
        sown = {row["id"] for row in everywhere(files / part, "paddocks") if row["sown_on"]}
        assert len(sown) > 200
    dressed = [row for row in everywhere(files / "season3", "paddocks") if row["seed_dressing"] == "yes"]
    assert dressed
    assert {row["dressing_group"] for row in dressed} == {"4A"}
