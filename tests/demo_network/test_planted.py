"""Planted events: each rests on its own rows, is where the README says, and is no other event's evidence."""

import re
from collections import Counter
from collections.abc import Callable, Iterator
from datetime import date, timedelta
from math import cos, hypot, radians
from pathlib import Path

import pytest

from demo_network.planted import EVENTS
from tests.demo_network.reading import Rows, everywhere, rows

BY_NAME = {event.name: event for event in EVENTS}
README = Path(__file__).parents[2] / "demo_network/README.md"
Without = Callable[..., Path]


def lines_that_differ(one: Path, other: Path) -> list[str]:
    """Every line that one of two sets of files has and the other lacks, with its file's kind and week."""
    found: list[str] = []
    for path in sorted({path.relative_to(folder) for folder in (one, other) for path in folder.rglob("*.*")}):
        texts = [Counter((folder / path).read_text(encoding="utf-8").splitlines()) for folder in (one, other)]
        found += [f"{path} {line}" for text, rest in (texts, texts[::-1]) for line in text - rest]
    return found


# what a line that may differ looks like, per event: the file, the district's paddocks or masts, the pest
OWN_LINES = {
    "hatch": r"season3/2026-W(17|18|19|20)/station_days\.csv a-s\d,2026-0(4-2[1-9]|4-30|5-0[1-5]),",
    "border": r"season3/2026-W20/observations\.csv \w+,2026-05-09,.*b-p\d+,lantern,canola,11,BBCH,redlegged_earth_mite",
    "first_find": r"season3/2026-W22/observations\.csv \w+,2026-05-2[01],.*a-p\d+,sextant,.*lucerne_flea,present",
    "moth_flight": r"season3/2026-W1[34]/observations\.csv \w+,2026-03-(23|30),.*lantern,.*cutworms,.*B-T[123],light",
    "flare": r"season3/2026-W2[2-4]/observations\.csv .*b-p\d+,lantern,.*,3A,2026-05-21,",
    "spread": r"season3/2026-W2[5-9]/observations\.csv .*a-p\d+,sextant,.*redlegged_earth_mite,present",
    "busy_looking": r"season3/2026-W23/observations\.csv .*b-p\d+,lantern,.*redlegged_earth_mite",
    "one_reporter": r"season3/2026-W26/observations\.csv .*b-p\d+,lantern,.*redlegged_earth_mite,present,.*saw damage",
}
# rows that each adds or alters (an altered one counts twice: as it was and as it is); None: checked by pattern only
HOW_MANY = {
    "border": 1,
    "first_find": 2,
    "moth_flight": 12,
    "flare": 3,
    "spread": 40,
    "busy_looking": 130,
    "one_reporter": 42,
}


@pytest.mark.parametrize("name", sorted(BY_NAME))
def test_leaving_one_out_changes_its_own_rows_only(files: Path, files_without: Without, name: str) -> None:
    differ = lines_that_differ(files, files_without(name))
    assert differ
    assert [line for line in differ if not re.match(OWN_LINES[name], line)] == []
    assert len(differ) == HOW_MANY.get(name, len(differ))


def test_leaving_two_out_is_leaving_out_each(files: Path, files_without: Without) -> None:
    both = Counter(lines_that_differ(files, files_without("border", "one_reporter")))
    each = Counter(lines_that_differ(files, files_without("border")))
    assert both == each + Counter(lines_that_differ(files, files_without("one_reporter")))


def test_the_readme_lists_every_event_with_its_place_weeks_and_kind() -> None:
    table = {
        line.split("`")[1]: line for line in README.read_text(encoding="utf-8").splitlines() if line.startswith("| `")
    }
    assert set(table) == set(BY_NAME)
    for name, event in BY_NAME.items():
        place = f"within {event.radius_km:.0f} km of {-event.latitude:.2f}° S {event.longitude:.2f}° E"
        assert place in table[name]
        assert event.district.title() in table[name]
        assert event.weeks[0] in table[name]
        assert event.weeks[-1].removeprefix("2026-") in table[name]
        assert event.pest.replace("_", " ") in table[name]
        assert event.artefact or f"| {event.kind} |" in table[name]


@pytest.mark.parametrize("name", sorted(set(BY_NAME) - {"hatch", "busy_looking", "moth_flight"}))
def test_planted_rows_lie_in_the_stated_circle(files: Path, files_without: Without, name: str) -> None:
    event = BY_NAME[name]
    ground = {row["id"]: row for row in rows(files / "network/paddocks.csv")}
    added = _only_in(files, files_without(name))
    assert added
    for row in added:
        spot = ground[row["paddock"]]
        north = (float(spot["latitude"]) - event.latitude) * 111.2
        east = (float(spot["longitude"]) - event.longitude) * 111.2 * cos(radians(event.latitude))
        assert hypot(north, east) < event.radius_km


def _only_in(one: Path, other: Path) -> Rows:
    there = {row["record_id"] for row in everywhere(other, "observations")}
    return [row for row in everywhere(one, "observations") if row["record_id"] not in there]


def live(files: Path, district: str, pest: str, last: date) -> Iterator[dict[str, str]]:
    """Ordinary rows of the live season up to a day; traps apart, they catch moths all along."""
    for row in everywhere(files / "season3", "observations"):
        if (row["district"], row["pest"]) == (district, pest) and row["day"] <= str(last) and not row["trap"]:
            yield row


def test_without_first_find_nobody_finds_a_flea_there_until_after_its_weeks(files_without: Without) -> None:
    found = live(files_without("first_find"), "sextant", "lucerne_flea", date(2026, 6, 7))
    looks = list(found)
    assert len(looks) > 100
    assert [row for row in looks if row["status"] == "present"] == []


def test_without_border_no_count_comes_near_a_number_that_matters(files_without: Without) -> None:
    """The lowest numbers in the catalogue: 10 a plant, 10 holes a leaf, and 2 a square metre, which in rows
    0.22 m apart is 2 × 0.5 × 0.22 = 0.22 in half a metre of row."""
    lowest = {"per_plant": 10, "holes_per_leaf": 10, "per_half_metre_row": 0.22}
    for row in everywhere(files_without("border") / "season3", "observations"):
        if row["unit"] in lowest:
            spots = [float(n) / int(row["units_per_spot"]) for n in row["spot_counts"].split(";")]
            at_edge = [n for n, at in zip(spots, row["spot_at"].split(";"), strict=True) if at == "edge"]
            for counted in (spots, at_edge or spots):
                assert sum(counted) / len(counted) < lowest[row["unit"]] / 2


def test_the_border_count_stands_clear_above_ten_at_every_spot(files: Path, files_without: Without) -> None:
    (row,) = _only_in(files, files_without("border"))
    spots = [float(n) / int(row["units_per_spot"]) for n in row["spot_counts"].split(";")]
    assert min(spots) >= 15
    assert len(spots) >= 5
    assert set(row["spot_at"].split(";")) == {"edge"}
    readers = rows(files / "network/subscribers.csv")
    assert [reader["id"] for reader in readers if row["paddock"] in reader["paddocks"].split(";")]


def test_the_busy_week_has_many_looks_and_the_usual_share_of_finds(files: Path, files_without: Without) -> None:
    first, last = date(2026, 5, 26), date(2026, 6, 1)
    usual = list(live(files_without("busy_looking"), "lantern", "redlegged_earth_mite", first - timedelta(days=1)))
    usual = [row for row in usual if row["day"] >= str(first - timedelta(weeks=8))]
    busy = [row for row in live(files, "lantern", "redlegged_earth_mite", last) if row["day"] >= str(first)]
    share, before = (sum(row["status"] == "present" for row in some) / len(some) for some in (busy, usual))
    assert len(busy) > 3 * len(usual) / 8
    assert 0.5 * before < share < 1.5 * before


def test_one_reporter_sent_most_of_the_finds_of_two_weeks(files: Path) -> None:
    since = date(2026, 6, 9)
    found = live(files, "lantern", "redlegged_earth_mite", date(2026, 6, 22))
    finders = Counter(row["reporter"] for row in found if row["status"] == "present" and row["day"] >= str(since))
    assert finders.most_common(1)[0][1] > 0.65 * finders.total()
