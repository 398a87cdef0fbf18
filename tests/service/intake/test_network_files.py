"""Network files on both stores: what is taken, what is refused and why, and that taking twice changes nothing."""

from dataclasses import dataclass
from datetime import date, datetime, timedelta
from pathlib import Path
from time import process_time

import pytest

from rules.records import Reportable, Station
from service.clock import SetClock
from service.errors import BadInput
from service.intake.network_files import take_network
from service.places import place
from service.store import network, weather
from service.store.base import Store
from tests.builders import NOW

DISTRICT = """
[[district]]
id = "north"
name = "North Bank"
zone = "Australia/Adelaide"
hotline = "+00 000 000"
hotline_name = "the invented plant health line"
temperature_type = "south-eastern"
season_opens = "02-15"
latitude = -46.0
longitude = 100.0
coordinator = "ivy"

[[district.reportables]]
id = "khapra"
names = ["khapra beetle", "Trogoderma granarium"]
listed_on = 2026-01-01
"""
SOUTH = DISTRICT.split("[[district.reportables]]")[0].replace("north", "south").replace("-46.0", "-48.0")
POSTCODES = """district,code,name,latitude,longitude,elevation_m
north,9001,Kelp Landing,-46,100,12.5
south,9002,Gull,-48,100,
"""
HOLDINGS = """id,district,name,registered_on
h1,north,Kelp Farm,2020-01-01
h2,north,Gull Farm,2021-05-04
h9,south,Far Farm,2020-01-01
"""
PADDOCK_COLUMNS = (
    "id,holding,district,name,latitude,longitude,elevation_m,area_ha,crop,sown_on,up_on,last_crop,pasture_before,"
    "capeweed_before,seed_dressing,dressing_group,grazed,flowering,row_spacing_m,plants_per_m2,enter_leave\n"
)
PADDOCKS = PADDOCK_COLUMNS + (
    "p1,h1,north,Creek,-46.01,100.01,20,40,canola,2026-04-20,2026-05-01,wheat,yes,no,yes,4A,2026-03-01;2026-03-20,no,0.25,40,yes\n"
    "p2,h2,north,Hill,-46.05,100.02,,,Field Pea,,,,,,,,,,,,\n"
)
PEOPLE = """id,district,name,email,roles
ivy,north,Ivy,ivy@example.org,coordinator;officer
tom,north,Tom,,grower
far,south,Far,,grower
"""
SUBSCRIBER_COLUMNS = "id,district,email,name,postcode,crops,paddocks,holding,language,consent,person\n"
SUBSCRIBERS = SUBSCRIBER_COLUMNS + (
    "s1,north,tom@example.org,Tom,9001,canola;oilseed rape;wheat,p1,h1,,on paper 2026-01-10,tom\n"
    "s2,north,ann@example.org,Ann,9001,,,,en,by mail 2026-01-11,\n"
)
STATIONS = "id,district,name,latitude,longitude,elevation_m,attribution\nw1,north,Kelp,-46.2,100.2,8,the bank's own\n"


@dataclass
class Desk:
    """A store with a folder for files."""

    store: Store
    folder: Path

    def take(self, text: str, name: str = "file.csv", at=NOW) -> dict[str, int]:
        path = self.folder / name
        path.write_text(text, encoding="utf-8")
        return take_network(self.store, path, clock=SetClock(at))

    def refused(self, text: str, name: str = "file.csv") -> list[tuple[int, str, str]]:
        """What is refused of a file; the store stays as it was."""
        before = self.everything()
        with pytest.raises(BadInput) as caught:
            self.take(text, name)
        assert self.everything() == before
        return [(refusal.row, refusal.field, refusal.remedy) for refusal in caught.value.refusals]

    def everything(self) -> list[object]:
        with self.store.reading() as c:
            return [
                c.execute(table.select().order_by(*table.primary_key)).all()
                for table in (
                    *(network.district, network.district_version, network.postcode, network.holding),
                    *(network.holding_version, network.paddock, network.person, network.subscriber),
                    *(weather.station, weather.station_version),
                )
            ]


@pytest.fixture
def desk(store: Store, tmp_path: Path) -> Desk:
    """The whole network taken, but for paddocks and readers."""
    desk = Desk(store, tmp_path)
    desk.take(DISTRICT + SOUTH, "district.toml")
    for text in (POSTCODES, HOLDINGS, PEOPLE):
        desk.take(text)
    return desk


def one(desk: Desk, text: str, field: str, words: str, name: str = "file.csv") -> None:
    """Exactly one refusal, of this field and with these words."""
    refusals = desk.refused(text, name)
    assert [each[1] for each in refusals] == [field], refusals
    assert words in refusals[0][2], refusals


def test_each_file_is_taken_and_taking_it_twice_changes_nothing(store: Store, tmp_path: Path) -> None:
    desk = Desk(store, tmp_path)
    files = [(DISTRICT + SOUTH, "district.toml", 2), (POSTCODES, "a.csv", 2), (HOLDINGS, "b.csv", 3)]
    files += [(PADDOCKS, "c.csv", 2), (PEOPLE, "d.csv", 3), (SUBSCRIBERS, "e.csv", 2), (STATIONS, "f.csv", 1)]
    for text, name, size in files:
        assert desk.take(text, name) == {"rows": size, "new": size, "changed": 0, "same": 0}
    before = desk.everything()
    for text, name, size in files:
        counts = desk.take(text, name, NOW + timedelta(days=9))
        assert counts == {"rows": size, "new": 0, "changed": 0, "same": size}
    assert desk.everything() == before


def test_what_was_taken_is_what_the_files_say(desk: Desk) -> None:
    for text in (PADDOCKS, SUBSCRIBERS, STATIONS):
        desk.take(text)
    with desk.store.reading() as c:
        district = network.get_district(c, "north", NOW)
        assert (district.hotline, district.holdings_to_hide, district.cut_off) == ("+00 000 000", 5, "Tue 12:00")
        names = ("khapra beetle", "Trogoderma granarium")
        assert district.reportables == (Reportable("khapra", names, date(2026, 1, 1)),)
        assert network.postcodes(c, "north", NOW)[0].place == place(-46, 100, None, 12.5)
        creek, hill = network.paddocks(c, "north", NOW)
        assert (creek.crop, creek.last_crop, creek.sown_on, creek.up_on) == (
            *("canola", "wheat"),
            *(date(2026, 4, 20), date(2026, 5, 1)),
        )
        assert (creek.pasture_before, creek.capeweed_before, creek.seed_dressing, creek.flowering) == (
            *(True, False, True, False),
        )
        assert (creek.dressing_group, creek.grazed) == ("4A", (date(2026, 3, 1), date(2026, 3, 20)))
        assert (creek.area_ha, creek.row_spacing_m, creek.plants_per_m2, creek.enter_leave) == (40, 0.25, 40, True)
        assert creek.place == place(-46.01, 100.01, None, 20.0)
        assert (hill.crop, hill.area_ha, hill.pasture_before, hill.grazed, hill.enter_leave) == (
            *("field_pea", None, None, (), False),
        )
        tom, ann = network.subscribers(c, "north")
        assert (tom.crops, tom.paddocks, tom.holding, tom.person) == (("canola", "wheat"), ("p1",), "h1", "tom")
        assert (ann.crops, ann.paddocks, ann.language, ann.state) == ((), (), "en", "confirmed")
        assert [person.roles for person in network.people(c, "north")] == [("coordinator", "officer"), ("grower",)]
        assert weather.stations(c, "north", NOW) == [
            Station("w1", "north", "Kelp", place(-46.2, 100.2, None, 8.0), "the bank's own")
        ]


def test_a_changed_paddock_gains_a_version_and_the_others_none(desk: Desk) -> None:
    desk.take(PADDOCKS)
    later = NOW + timedelta(days=1)
    counts = desk.take(PADDOCKS.replace("Field Pea,,", "Field Pea,2026-05-12,"), at=later)
    assert counts == {"rows": 2, "new": 0, "changed": 1, "same": 1}
    with desk.store.reading() as c:
        assert [paddock.sown_on for paddock in network.paddocks(c, "north", NOW)] == [date(2026, 4, 20), None]
        assert network.paddocks(c, "north", later)[1].sown_on == date(2026, 5, 12)


def test_a_changed_network_is_known_from_when_it_was_taken(desk: Desk) -> None:
    desk.take(STATIONS)
    later = NOW + timedelta(days=1)
    changes = {
        "district.toml": DISTRICT.replace('"south-eastern"', '"western"') + SOUTH,
        "a.csv": POSTCODES.replace("Kelp Landing", "Kelp Point"),
        "b.csv": HOLDINGS.replace("Kelp Farm,2020-01-01", "Kelp Farm,2020-02-01"),
        "f.csv": STATIONS.replace("-46.2", "-46.3"),
    }
    for name, text in changes.items():
        assert desk.take(text, name, later)["changed"] == 1, name

    def known(at: datetime) -> tuple[object, ...]:
        with desk.store.reading() as c:
            return (
                network.get_district(c, "north", at).temperature_type,
                network.postcodes(c, "north", at)[0].name,
                network.holdings(c, "north", at, date(2026, 1, 1))[0].registered_on,
                weather.stations(c, "north", at)[0].place.latitude,
            )

    assert known(NOW) == ("south-eastern", "Kelp Landing", date(2020, 1, 1), -46.2)
    assert known(later) == ("western", "Kelp Point", date(2020, 2, 1), -46.3)


# --- districts -----------------------------------------------------------------------------------


@pytest.fixture
def bare(store: Store, tmp_path: Path) -> Desk:
    return Desk(store, tmp_path)


def test_a_district_makes_its_choices_itself(bare: Desk) -> None:
    def wrong(old: str, new: str, field: str, words: str) -> None:
        assert old in DISTRICT
        one(bare, DISTRICT.replace(old, new), field, words, "district.toml")

    wrong('temperature_type = "south-eastern"\n', "", "temperature_type", "has no default")
    wrong('"south-eastern"', '"south-easten"', "temperature_type", "did you mean south-eastern")
    wrong("Australia/Adelaide", "Australia/Adelade", "zone", "(did you mean Australia/Adelaide?)")
    wrong("Australia/Adelaide", "../etc/passwd", "zone", "IANA")
    wrong("Australia/Adelaide", "Australia", "zone", "IANA")
    for day in ("15-02", "02-30", "02-29", "2-15", "Feb 15", "2026-02-15"):
        wrong('"02-15"', f'"{day}"', "season_opens", "MM-DD")
    wrong('coordinator = "ivy"', 'coordinator = "ivy"\ncut_off = "Tuesday 12:00"', "cut_off", "Tue 12:00")
    wrong('coordinator = "ivy"', 'coordinator = "ivy"\nsign_by = "Wed 24:00"', "sign_by", "Tue 12:00")
    wrong('coordinator = "ivy"', 'coordinator = "ivy"\nholdings_to_hide = 2', "holdings_to_hide", "from 3")
    wrong('coordinator = "ivy"', 'coordinator = "ivy"\nholdings_to_hide = 5.5', "holdings_to_hide", "whole number")
    wrong('coordinator = "ivy"', 'coordinator = "ivy"\nhotlin = "1"', "hotlin", "did you mean hotline")
    wrong('coordinator = "ivy"\n', "", "coordinator", "empty")
    wrong('"+00 000 000"', '"=1+1"', "hotline", "formula")
    wrong('"North Bank"', '"<b>North</b>"', "name", "markup")
    wrong("latitude = -46.0", "latitude = 460", "latitude", "from -90 to 90")
    wrong("listed_on = 2026-01-01\n", "", "reportables[1].listed_on", "empty")
    wrong('["khapra beetle", "Trogoderma granarium"]', '"khapra"', "reportables[1].names", "as a list")
    wrong('["khapra beetle", "Trogoderma granarium"]', '["kh"]', "reportables[1].names", "matches too much")


def test_a_file_of_districts_is_taken_whole_or_not_at_all(bare: Desk) -> None:
    bad = DISTRICT + SOUTH.replace("Australia/Adelaide", "Mars/Olympus")
    assert [(row, field) for row, field, _ in bare.refused(bad, "district.toml")] == [(2, "zone")]
    one(bare, DISTRICT + DISTRICT, "id", "row 1 is the same", "district.toml")
    twice = DISTRICT + "\n[[district.reportables]]\n" + DISTRICT.split("[[district.reportables]]\n")[1]
    one(bare, twice, "reportables", "khapra is listed twice", "district.toml")


def test_what_is_no_district_file_is_refused(bare: Desk) -> None:
    for text in ("", "[district]\nid = 1\n", "[[district]\n", 'name = "x"\n' + DISTRICT, "district = [1]\n"):
        assert bare.refused(text, "district.toml") == []


def test_a_district_may_change_its_mind(desk: Desk) -> None:
    counts = desk.take(DISTRICT.replace("North Bank", "North Shoal"), "district.toml")
    assert counts == {"rows": 1, "new": 0, "changed": 1, "same": 0}


# --- references ----------------------------------------------------------------------------------


def test_what_a_row_refers_to_must_be_there(desk: Desk) -> None:
    one(
        desk, POSTCODES.replace("north,9001", "nroth,9001"), "district", "(did you mean north?); take the district file"
    )
    one(desk, PADDOCKS.replace("p2,h2", "p2,h3"), "holding", "take the holdings file first")
    one(desk, PADDOCKS.replace("p2,h2", "p2,h9"), "holding", "not known in this district; take")
    desk.take(PADDOCKS)
    one(desk, SUBSCRIBERS.replace("Ann,9001", "Ann,9002"), "postcode", "no postcode of this district")
    one(desk, SUBSCRIBERS.replace(",tom\n", ",far\n"), "person", "take the people file first")
    one(desk, SUBSCRIBERS.replace(",p1,h1,", ",p3,h1,"), "paddocks", "p3 is no paddock we know")


def test_a_reader_has_only_the_paddocks_of_their_own_holding(desk: Desk) -> None:
    desk.take(PADDOCKS)
    one(desk, SUBSCRIBERS.replace(",p1,h1,", ",p1;p2,h1,"), "paddocks", "p2 does not belong")
    one(desk, SUBSCRIBERS.replace(",p1,h1,", ",p1,,"), "paddocks", "p1 does not belong")
    one(desk, SUBSCRIBERS.replace(",p1,h1,", ",p1,h2,"), "paddocks", "p1 does not belong")


def test_a_paddock_changes_hands_only_after_its_old_readers_gave_it_up(desk: Desk) -> None:
    desk.take(PADDOCKS)
    desk.take(SUBSCRIBERS)
    sold = PADDOCKS.replace("p1,h1", "p1,h2")
    one(desk, sold, "holding", "(s1)")
    desk.take(SUBSCRIBERS.replace(",p1,h1,", ",,h1,"))
    assert desk.take(sold)["changed"] == 1


def test_a_row_can_not_take_over_an_id_of_another_district(desk: Desk) -> None:
    one(desk, HOLDINGS.replace("h9,south", "h9,north"), "id", "in use in another district")
    one(desk, PEOPLE.replace("far,south", "far,north"), "id", "in use in another district")
    desk.take(STATIONS)
    one(desk, STATIONS.replace("north,Kelp,-46.2", "south,Kelp,-48.2"), "id", "in use in another district")


def test_a_place_far_from_its_district_is_taken_for_a_slip(desk: Desk) -> None:
    one(desk, POSTCODES.replace("Landing,-46,100", "Landing,46,100"), "latitude", "a sign missing")
    one(desk, STATIONS.replace("-46.2,100.2", "-46.2,-100.2"), "latitude", "a sign missing")
    one(desk, PADDOCKS.replace("-46.05,100.02", "0,0"), "latitude", "swapped")


# --- cells ---------------------------------------------------------------------------------------


def test_paddocks_are_checked_cell_by_cell(desk: Desk) -> None:
    def wrong(changes: dict[str, str], field: str, words: str) -> None:
        cells = {
            "id": "p1",
            "holding": "h1",
            "district": "north",
            "name": "Creek",
            "latitude": "-46",
            "longitude": "100",
        }
        cells |= changes
        line = ",".join(cells.get(name, "") for name in PADDOCK_COLUMNS.strip().split(","))
        one(desk, PADDOCK_COLUMNS + line + "\n", field, words)

    wrong({"crop": "canloa"}, "crop", "did you mean canola")
    wrong({"crop": "quinoa"}, "crop", "there is: barley, canola, chickpea")
    wrong({"last_crop": "wheats"}, "last_crop", "did you mean wheat")
    wrong({"latitude": "91"}, "latitude", "from -90 to 90")
    wrong({"longitude": ""}, "longitude", "empty")
    wrong({"elevation_m": "9000"}, "elevation_m", "to 8850")
    wrong({"area_ha": "0"}, "area_ha", "from 0.01")
    wrong({"sown_on": "12/05/2026"}, "sown_on", "YYYY-MM-DD")
    wrong({"sown_on": "2026-05-12", "up_on": "2026-05-01"}, "up_on", "before sown_on 2026-05-12")
    wrong({"grazed": "2026-03-01;soon"}, "grazed", "YYYY-MM-DD")
    wrong({"enter_leave": "maybe"}, "enter_leave", "yes, no")
    wrong({"seed_dressing": "yes", "dressing_group": "imidacloprid"}, "dressing_group", "no product")
    wrong({"seed_dressing": "no", "dressing_group": "4A"}, "dressing_group", "without seed_dressing yes")
    wrong({"row_spacing_m": "25"}, "row_spacing_m", "to 3")
    wrong({"plants_per_m2": "-1"}, "plants_per_m2", "from 0.1")
    wrong({"name": "=HYPERLINK(1)"}, "name", "formula")
    wrong({"name": "\uff1dHYPERLINK(1)"}, "name", "formula")  # the wide sign, which some run too
    wrong({"name": "<script>x</script>"}, "name", "markup")
    wrong({"id": "p 1"}, "id", "write an id")
    wrong({"name": ""}, "name", "empty")


def test_people_and_readers_are_checked_cell_by_cell(desk: Desk) -> None:
    desk.take(PADDOCKS)
    one(desk, PEOPLE.replace("officer", "oficer"), "roles", "did you mean officer")
    one(desk, PEOPLE.replace("Far,,grower", "Far,,"), "roles", "empty")
    one(desk, PEOPLE.replace("ivy@example.org", "ivy at example.org"), "email", "one e-mail address")
    one(desk, SUBSCRIBERS.replace("ann@example.org", ""), "email", "empty")
    injected = '"ann@example.org\r\nBcc: all@example.org"'
    one(desk, SUBSCRIBERS.replace("ann@example.org", injected), "email", "line break")
    one(desk, SUBSCRIBERS.replace(",Ann,", ',"Ann\nBcc: all@example.org",'), "name", "line break")
    one(desk, SUBSCRIBERS.replace("by mail 2026-01-11", ""), "consent", "how and when this reader agreed")
    one(desk, SUBSCRIBERS.replace(",en,", ",xx,"), "language", "write one of: en")
    one(desk, SUBSCRIBERS.replace("oilseed rape", "oilsed rape"), "crops", "did you mean oilseed rape")
    one(desk, HOLDINGS.replace("2021-05-04", "yesterday"), "registered_on", "YYYY-MM-DD")
    one(desk, POSTCODES.replace("9001", "<9001>"), "code", "markup")


def test_an_id_given_twice_names_the_first_row(desk: Desk) -> None:
    assert desk.refused(HOLDINGS + "h1,north,Again,2020-01-01\n")[0][:2] == (5, "id")
    one(desk, POSTCODES + "north,9001,Again,-46,100,\n", "code", "row 2 is the same")
    assert desk.take(POSTCODES + "south,9001,Other,-48,100,\n")["new"] == 1


def test_every_fault_of_a_file_is_named_at_once(desk: Desk) -> None:
    text = "id,district,name,registered_on\n,north,A,2020-01-01\nh3,north,=B,soon\nh4,nowhere,C,2020-01-01\nh5,north\n"
    found = [(row, field) for row, field, _ in desk.refused(text)]
    assert found == [(2, "id"), (3, "name"), (3, "registered_on"), (4, "district"), (5, "(row)")]


def test_other_kinds_of_file_are_not_the_networks(desk: Desk) -> None:
    with pytest.raises(BadInput, match="station_days, which are no part of the network"):
        desk.take("station,day,rain\nw1,2026-05-01,0\n")


# --- readers who went --------------------------------------------------------------------------


@pytest.mark.parametrize("state", ["left", "paused"])
def test_a_list_does_not_bring_back_a_reader_who_went(desk: Desk, state: str) -> None:
    desk.take(PADDOCKS)
    desk.take(SUBSCRIBERS)
    with desk.store.writing() as c:
        assert network.set_subscriber_state(c, "s2", state)
    assert desk.take(SUBSCRIBERS)["same"] == 2
    assert desk.take(SUBSCRIBERS.replace(",Ann,", ",Anne,"))["changed"] == 1
    with desk.store.reading() as c:
        assert network.get_subscriber(c, "s2").state == state
        assert network.get_subscriber(c, "s2").name == "Anne"


def test_an_address_that_left_does_not_come_back_under_another_id(desk: Desk) -> None:
    desk.take(PADDOCKS)
    desk.take(SUBSCRIBERS)
    with desk.store.writing() as c:
        network.set_subscriber_state(c, "s2", "left")
    again = SUBSCRIBER_COLUMNS + "s3,north,ANN@example.org,Ann,9001,,,,en,bought list,\n"
    one(desk, again, "email", "only its owner can come back")
    desk.take(SUBSCRIBERS.replace("ann@example.org", "anne@example.org"))  # a new address does not free the old one
    one(desk, again, "email", "only its owner can come back")


# --- size ------------------------------------------------------------------------------------------


def test_a_list_ten_times_as_long_takes_about_ten_times_as_long(desk: Desk) -> None:
    """Quadratic work would take a hundred times; 25 leaves room for a busy machine."""

    def seconds(count: int) -> float:
        lines = [f"{count}-{n},north,Farm {n},2020-01-01" for n in range(count)]
        before = process_time()
        assert desk.take("id,district,name,registered_on\n" + "\n".join(lines) + "\n")["new"] == count
        return process_time() - before

    seconds(50)  # what is done once only
    short, long = seconds(200), seconds(2000)
    assert long < 25 * short
