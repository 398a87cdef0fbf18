"""The installed command, as a person runs it: what it prints, and the four exit codes."""

import json
import signal
import subprocess
import sys
from pathlib import Path
from select import select

import pytest

from service import doctor
from service.settings import Settings, WebSettings

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
    assert list(findings) == ["settings", "store", "mail server", "links", "clock", "disk"]
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


# --- when things go wrong ----------------------------------------------------------------------------


def test_the_doctor_finds_secrets_that_others_can_read(home: Path) -> None:
    (home / "var" / "keys").chmod(0o644)
    done = leafturn(home, "doctor", "--json")
    (home / "var" / "keys").chmod(0o600)
    settings = json.loads(done.stdout)["findings"][0]
    assert not settings["well"]
    assert "chmod 600 var/keys" in settings["text"]
    assert json.loads(leafturn(home, "doctor", "--json").stdout)["findings"][0]["well"]


def test_the_doctor_looks_where_the_links_of_digests_lead() -> None:
    for url, words in {
        "http://localhost:8765": "no reader can open",
        "http://leaf.example.org": "https",
        "https://leaf.example.org": "",
    }.items():
        found = doctor._links(Settings(web=WebSettings(base_url=url)))
        assert found["well"] == (not words)
        assert words in found["text"]


def test_the_doctor_outlives_a_store_that_has_no_url(home: Path) -> None:
    (home / "odd.toml").write_text('[store]\nurl = "ada:hush"\n', encoding="utf-8")
    done = leafturn(home, "doctor", "--settings", "odd.toml", "--json")
    findings = {each["what"]: each["well"] for each in json.loads(done.stdout)["findings"]}
    assert (findings["store"], findings["disk"]) == (False, True)
    assert "hush" not in done.stdout + done.stderr


def test_what_the_machine_refuses_is_said_and_nothing_is_taken(home: Path) -> None:
    good, bad = LOOKS.format(status="absent").replace("a1,", "k1,"), "k2,2026-05-10,9001,lucerne_flea,perhaps,ivy\n"
    (home / "mixed.csv").write_text(good + bad, encoding="utf-8")
    for target in (".", "nowhere/rest.csv"):
        done = leafturn(home, "take", "mixed.csv", "--keep-good", target)
        assert done.returncode == 3
        assert "Traceback" not in done.stderr
        assert "Mend that and run it again" in done.stderr
    over = leafturn(home, "take", "mixed.csv", "--keep-good", "var/leafturn.db")
    assert (over.returncode, "is there already" in over.stderr) == (1, True)
    assert json.loads(leafturn(home, "take", "mixed.csv", "--keep-good", "rest.csv", "--json").stdout)["new"] == 1


def test_a_file_can_not_steer_the_terminal(home: Path) -> None:
    (home / "steer.csv").write_text("d\x1b]0;owned\x07y,day,pest,status,reporter,paddock\n", encoding="utf-8")
    done = leafturn(home, "take", "steer.csv")
    assert done.returncode == 1
    assert "\\x1b]0;owned" in done.stderr
    assert "\x1b" not in done.stderr


def _heed_ctrl_c() -> None:
    """Whatever was started in the background ignores Ctrl-C, and so do its children, unless they are told."""
    signal.signal(signal.SIGINT, signal.SIG_DFL)


@pytest.mark.parametrize("how", [signal.SIGINT, signal.SIGTERM])
def test_a_person_or_the_machine_can_stop_a_command(home: Path, how: signal.Signals) -> None:
    assert not (home / "var" / "leafturn.db-wal").exists()
    rows = "".join(f"s{n},2026-05-10,9001,lucerne_flea,absent,ivy\n" for n in range(200_000))
    (home / "long.csv").write_text(LOOKS.split("\n")[0] + "\n" + rows, encoding="utf-8")
    with subprocess.Popen(
        [LEAFTURN, "take", "long.csv"], cwd=home, stderr=subprocess.PIPE, text=True, preexec_fn=_heed_ctrl_c
    ) as command:
        while not (home / "var" / "leafturn.db-wal").exists():  # it has opened the store
            assert command.poll() is None
            select([], [], [], 0.02)
        command.send_signal(how)
        _, said = command.communicate(timeout=60)
    assert command.returncode == 130
    assert said == "leafturn: stopped; nothing is half-kept. Run it again to go on\n"
    assert json.loads(leafturn(home, "doctor", "--json").stdout)["findings"][1]["well"]
