"""Settings: one file and the environment, read once; what can't be used is named."""

import os
import re
import tomllib
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import pytest
from pydantic import ValidationError

from service import settings
from service.errors import BadSettings
from service.settings import Settings


@pytest.fixture(autouse=True)
def _plain_surroundings(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    """No settings from outside, and a working folder of the test's own."""
    for name in [name for name in os.environ if name.startswith("LEAFTURN_")]:
        monkeypatch.delenv(name)
    monkeypatch.chdir(tmp_path)


def written(folder: Path, text: str) -> Path:
    path = folder / "leafturn.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_without_a_file_every_setting_has_its_default() -> None:
    assert settings.read() == Settings()
    assert settings.read().store.url == "sqlite:///var/leafturn.db"


def test_the_file_changes_what_it_names_and_the_environment_wins(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    written(tmp_path, '[store]\nurl = "sqlite:///file.db"\nbusy_s = 5\n[mail]\nport = 2525\n')
    monkeypatch.setenv("LEAFTURN_STORE__URL", "sqlite:///environment.db")
    monkeypatch.setenv("LEAFTURN_DATA_DIR", "elsewhere")
    read = settings.read()  # the file of the working folder
    assert (read.store.url, read.store.busy_s) == ("sqlite:///environment.db", 5)
    assert (read.mail.port, read.mail.host, read.data_dir) == (2525, "127.0.0.1", "elsewhere")
    assert settings.read(Path("leafturn.toml")) == read


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("[mail]\nport = 70000\n", r"mail\.port: .*65535.* \(given: 70000\)"),
        ('[mail]\nport = "x"\n', r"mail\.port"),
        ('[mail]\nstarttls = "maybe"\n', r"mail\.starttls: .*required.*never"),
        ("[store]\nbusy_s = 0\n", r"store\.busy_s"),
        ("[delivery]\nbatch = 65\n", r"delivery\.batch"),
        ('[stroe]\nurl = "x"\n', r"stroe: there is no such setting"),
        ('[store]\nulr = "x"\n', r"store\.ulr: there is no such setting"),
        ('store = "x"\n', r"store: "),
        ('[mail]\nsender = "Digest <digest@example.org>"\n', r"mail\.sender"),
        ('[mail]\nsender = "digest@example.org\\r\\nBcc: x@example.org"\n', r"mail\.sender"),
        ('[web]\nbase_url = "example.org"\n', r"web\.base_url"),
        ('[web]\nbase_url = "https://example.org/ leaf"\n', r"web\.base_url"),
        ("[mail\n", r"can't be read as TOML.*line 1"),
    ],
)
def test_a_value_that_can_not_be_used_is_named(tmp_path: Path, text: str, words: str) -> None:
    with pytest.raises(BadSettings, match=words):
        settings.read(written(tmp_path, text))


def test_all_bad_values_are_named_at_once(tmp_path: Path) -> None:
    with pytest.raises(BadSettings) as caught:
        settings.read(written(tmp_path, "[mail]\nport = 0\n[store]\nbusy_s = 0\n"))
    assert "mail.port" in str(caught.value)
    assert "store.busy_s" in str(caught.value)


@pytest.mark.parametrize(
    ("name", "value", "words"),
    [
        ("LEAFTURN_MAIL__PORT", "x", r"mail\.port"),
        ("LEAFTURN_STORE", "sqlite:///x", "LEAFTURN_STORE__URL"),
        ("LEAFTURN_STORE__NOPE", "1", r"store\.nope: there is no such setting"),
    ],
)
def test_a_bad_value_of_the_environment_is_named(
    monkeypatch: pytest.MonkeyPatch, name: str, value: str, words: str
) -> None:
    monkeypatch.setenv(name, value)
    with pytest.raises(BadSettings, match=words):
        settings.read()


def test_a_file_that_is_named_must_be_there_and_be_text(tmp_path: Path) -> None:
    with pytest.raises(BadSettings, match="leafturn init"):
        settings.read(tmp_path / "none.toml")
    (tmp_path / "bytes.toml").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(BadSettings, match="can't be read"):
        settings.read(tmp_path / "bytes.toml")


def test_what_was_read_can_not_be_changed() -> None:
    read = settings.read()
    with pytest.raises(ValidationError):
        read.data_dir = "x"
    with pytest.raises(ValidationError):
        read.mail.port = 1


def test_the_commented_file_names_every_setting_with_its_default_and_reads_back(tmp_path: Path) -> None:
    text = settings.commented_file()
    written(tmp_path, text)
    assert settings.read() == Settings()
    opened = re.sub(r"(?m)^# (\w+ = )", r"\1", text)
    found = tomllib.loads(opened)
    flat = {
        f"{name}.{inner}" if isinstance(value, dict) else name: each
        for name, value in found.items()
        for inner, each in (value.items() if isinstance(value, dict) else [("", value)])
    }
    assert flat == {name: default for name, _, default, _ in settings.table()}
    written(tmp_path, opened)
    assert settings.read() == Settings()


def test_every_setting_has_words_for_a_person() -> None:
    rows = list(settings.table())
    assert len({name for name, *_ in rows}) == len(rows) > 15
    for name, kind, _, words in rows:
        assert words.endswith("."), name
        assert kind, name


@pytest.mark.parametrize("url", ["http://[::1]:8765", "https://leaf.example.org", "https://example.org/leaf/turn"])
def test_links_may_begin_with_any_web_address(tmp_path: Path, url: str) -> None:
    assert settings.read(written(tmp_path, f'[web]\nbase_url = "{url}"\n')).web.base_url == url


def test_paths_are_taken_from_the_folder_of_the_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Run elsewhere, a command must not make new keys and an empty store there."""
    text = '[mail]\npassword_file = "secret"\n[store]\nurl = "sqlite:///kept/store.db"\n'
    path = written(tmp_path, 'data_dir = "/srv/leaf"\n' + text)
    (tmp_path / "elsewhere").mkdir()
    monkeypatch.chdir(tmp_path / "elsewhere")
    read = settings.read(path)
    assert read.data_dir == "/srv/leaf"
    assert read.keys_file == str(tmp_path / "var" / "keys")
    assert read.mail.password_file == str(tmp_path / "secret")
    assert read.store.url == f"sqlite:///{tmp_path}/kept/store.db"


@pytest.mark.parametrize(
    "url", ["sqlite:////srv/leaf.db", "sqlite://", "sqlite:///:memory:", "postgresql://ada@h/leaf"]
)
def test_a_store_that_is_no_file_beside_the_settings_stays_where_it_is(tmp_path: Path, url: str) -> None:
    assert settings.read(written(tmp_path, f'[store]\nurl = "{url}"\n')).store.url == url


# --- secrets -----------------------------------------------------------------------------------------


def test_a_password_is_neither_shown_nor_repeated_in_an_error(tmp_path: Path) -> None:
    read = settings.read(written(tmp_path, '[mail]\npassword = "hush-hush"\n'))
    assert settings.mail_password(read) == "hush-hush"
    assert "hush-hush" not in repr(read)
    with pytest.raises(BadSettings) as caught:
        settings.read(written(tmp_path, '[mail]\npassword = ["hush-hush"]\n'))
    assert "mail.password" in str(caught.value)
    assert "hush-hush" not in str(caught.value)


def test_a_stores_password_is_not_repeated_either(tmp_path: Path) -> None:
    assert "hush" not in repr(settings.read(written(tmp_path, '[store]\nurl = "postgresql://ada:hush@h/leaf"\n')))
    for text in ('[store]\nurl = ["postgresql://ada:hush@h/leaf"]\n', 'mail = ["hush"]\n'):
        with pytest.raises(BadSettings) as caught:
            settings.read(written(tmp_path, text))
        assert "hush" not in str(caught.value)


def test_a_password_may_stand_in_a_file_of_its_own(tmp_path: Path) -> None:
    (tmp_path / "secret").write_text("from a file\n", encoding="utf-8")
    path = written(tmp_path, f'[mail]\npassword = "other"\npassword_file = "{tmp_path / "secret"}"\n')
    assert settings.mail_password(settings.read(path)) == "from a file"
    (tmp_path / "secret").unlink()
    with pytest.raises(BadSettings, match=r"mail\.password_file"):
        settings.mail_password(settings.read(path))


def test_keys_are_made_once_and_only_their_owner_may_read_them(tmp_path: Path) -> None:
    read = Settings(keys_file=str(tmp_path / "new" / "keys"))
    (key,) = settings.keys(read)
    assert len(key) >= 32
    assert settings.keys(read) == [key]
    assert (tmp_path / "new" / "keys").stat().st_mode & 0o777 == 0o600


def test_of_two_who_make_keys_at_once_both_use_the_same(tmp_path: Path) -> None:
    """The second must not write over keys that have signed links already."""
    read = Settings(keys_file=str(tmp_path / "keys"))
    with ThreadPoolExecutor(8) as pool:
        made = list(pool.map(lambda _: settings.keys(read), range(64)))
    assert {tuple(each) for each in made} == {tuple(settings.keys(read))}
    assert [each.name for each in tmp_path.iterdir()] == ["keys"]
    assert not settings.write_new(tmp_path / "keys", "x" * 40)
    assert settings.keys(read) == made[0]


def test_keys_are_read_newest_first_and_short_ones_refused(tmp_path: Path) -> None:
    file = tmp_path / "keys"
    file.write_text(f"{'n' * 40}\n\n  {'o' * 32}  \n", encoding="utf-8")
    assert settings.keys(Settings(keys_file=str(file))) == ["n" * 40, "o" * 32]
    for text in ("", "short\n", f"{'n' * 40}\nshort\n"):
        file.write_text(text, encoding="utf-8")
        with pytest.raises(BadSettings, match="keys_file"):
            settings.keys(Settings(keys_file=str(file)))
    with pytest.raises(BadSettings, match="keys_file"):
        settings.keys(Settings(keys_file=str(tmp_path)))
