"""The installed command, as a person runs it: what it prints, and the four exit codes."""

import json
import subprocess
import sys
from pathlib import Path

import pytest

LEAFTURN = str(Path(sys.executable).with_name("leafturn"))
DISTRICT = """
[[district]]
id = "north"
name = "North Bank"
zone = "Australia/Adelaide"
hotline = "0000 000 000"
hotline_name = "the invented plant health line"
temperature_type = "south-eastern"
season_opens = "02-15"
latitude = -46.0
longitude = 100.0
coordinator = "ivy"
"""
PEOPLE = "id,district,name,email,roles\nivy,north,Ivy Tern,ivy@example.org,coordinator\n"
POSTCODES = "district,code,name,latitude,longitude,elevation_m\nnorth,9001,Kelp Landing,-46.0,100.0,12\n"
LOOKS = "record_id,day,postcode,pest,status,reporter\na1,2026-05-10,9001,lucerne_flea,{status},ivy\n"


def leafturn(folder: Path, *words: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run([LEAFTURN, *words], cwd=folder, capture_output=True, text=True, timeout=120, check=False)


@pytest.fixture(scope="module")
def home(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder in which everything was set up by the commands alone."""
    folder = tmp_path_factory.mktemp("home")
    for name, text in {"district.toml": DISTRICT, "people.csv": PEOPLE, "postcodes.csv": POSTCODES}.items():
        (folder / name).write_text(text, encoding="utf-8")
    assert leafturn(folder, "init").returncode == 0
    for name in ("district.toml", "people.csv", "postcodes.csv"):
        done = leafturn(folder, "take", name)
        assert done.returncode == 0, done.stderr
    return folder


def test_help_is_grouped_by_person(home: Path) -> None:
    said = leafturn(home, "--help").stdout
    for heading in ("For the coordinator", "For field officers and imports", "For the operator"):
        assert heading in said


def test_init_keeps_a_file_that_is_there(home: Path) -> None:
    done = leafturn(home, "init")
    assert done.returncode == 1
    assert "is there already" in done.stderr


def test_a_good_file_is_taken_once(home: Path) -> None:
    (home / "looks.csv").write_text(LOOKS.format(status="absent"), encoding="utf-8")
    first = leafturn(home, "take", "looks.csv", "--json")
    assert first.returncode == 0, first.stdout
    assert json.loads(first.stdout)["new"] == 1
    assert json.loads(leafturn(home, "take", "looks.csv", "--json").stdout)["new"] == 0


def test_a_bad_file_is_refused_by_row_field_and_remedy(home: Path) -> None:
    (home / "bad.csv").write_text(LOOKS.format(status="perhaps"), encoding="utf-8")
    done = leafturn(home, "take", "bad.csv")
    assert done.returncode == 1
    assert "row 2, status = 'perhaps'" in done.stderr
    as_json = json.loads(leafturn(home, "take", "bad.csv", "--json").stdout)
    assert as_json["refused"][0]["field"] == "status"
    assert as_json["refused"][0]["remedy"]


def test_wrong_words_are_a_usage_error(home: Path) -> None:
    assert leafturn(home, "take").returncode == 2
    assert leafturn(home, "edition", "sing", "north-2026-W20").returncode == 2


def test_a_store_that_does_not_answer_is_a_service_error(home: Path) -> None:
    (home / "far.toml").write_text('[store]\nurl = "postgresql://nobody@127.0.0.1:1/none"\n', encoding="utf-8")
    done = leafturn(home, "run", "north", "--settings", "far.toml")
    assert done.returncode == 3
    assert "the store" in done.stderr
    assert "Traceback" not in done.stderr


def test_a_setting_that_is_wrong_is_named(home: Path) -> None:
    (home / "wrong.toml").write_text("[mail]\nport = 99999\n", encoding="utf-8")
    done = leafturn(home, "run", "north", "--settings", "wrong.toml")
    assert done.returncode == 1
    assert "mail.port" in done.stderr


def test_the_doctor_says_what_is_well_and_what_is_not(home: Path) -> None:
    (home / "sick.toml").write_text('[mail]\nport = 1\nstarttls = "never"\n', encoding="utf-8")
    done = leafturn(home, "doctor", "--settings", "sick.toml", "--json")
    findings = {each["what"]: each for each in json.loads(done.stdout)["findings"]}
    assert list(findings) == ["settings", "store", "mail server", "clock", "disk"]
    assert not findings["mail server"]["well"]
    assert "127.0.0.1:1" in findings["mail server"]["text"]
    assert findings["store"]["well"], findings["store"]["text"]
    assert done.returncode == 3


def test_the_rules_run_and_draft_on_what_there_is(home: Path) -> None:
    drafted = leafturn(home, "edition", "draft", "north", "--json")
    assert drafted.returncode == 0, drafted.stdout
    shown = leafturn(home, "edition", "show", json.loads(drafted.stdout)["edition"])
    assert shown.returncode == 0, shown.stderr
    missing = leafturn(home, "edition", "show", "north-1999-W01")
    assert missing.returncode == 1
    assert "there is no edition" in missing.stderr
