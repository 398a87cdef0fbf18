"""One table of settings: name, type, default, help. One TOML file plus environment, read once, frozen.

The environment wins over the file: `store.url` is LEAFTURN_STORE__URL. A secret may come from a file:
`mail.password_file`, `keys_file`. Paths that do not begin at the root are taken from the folder of the file, so
that a command means the same wherever it is run with `--settings`.
"""

import os
import secrets
import tempfile
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError
from pydantic_settings import BaseSettings, PydanticBaseSettingsSource, SettingsConfigDict, SettingsError

from service.errors import BadSettings

FILE_NAME = "leafturn.toml"
_ADDRESS = r"^[!#-'*+./0-9=?A-Z^_`a-z{|}~-]+@[0-9A-Za-z.-]+$"  # bare: the name beside it is a setting of its own
_LINK = r"^https?://[0-9A-Za-z.:\[\]-]+(/[!-;=?-~]*)?$"
_SECRET = ("mail.password", "store.url")  # never repeated


class _Group(BaseModel):
    model_config = ConfigDict(frozen=True, extra="forbid")


class StoreSettings(_Group):
    url: str = Field(
        "sqlite:///var/leafturn.db",
        description="Where everything is kept: sqlite:///path, or postgresql://user@host/name.",
        repr=False,
    )
    busy_s: int = Field(30, ge=1, description="How long to wait for another writer [s].")


class MailSettings(_Group):
    host: str = Field("127.0.0.1", description="The SMTP server that takes the digests.")
    port: int = Field(25, ge=1, le=65535, description="Its port.")
    starttls: Literal["required", "never"] = Field(
        "required", description="'required', or 'never' for a server on this machine."
    )
    user: str = Field("", description="User name, if the server asks for one.")
    password: str = Field("", description="Its password; better: password_file.", repr=False)
    password_file: str = Field("", description="A file that holds the password.")
    sender: str = Field("digest@localhost", pattern=_ADDRESS, description="The address that the digests come from.")
    sender_name: str = Field("Leafturn digest", description="The name beside it.")
    timeout_s: float = Field(60.0, gt=0, description="Longest wait for one answer of the server [s].")
    connections: int = Field(4, ge=1, le=100, description="Connections kept open while sending.")


class DeliverySettings(_Group):
    doubtful: Literal["retry", "hold"] = Field(
        "retry",
        description="A message whose acceptance was not recorded when the process died: send again, or hold.",
    )
    expires_h: int = Field(72, ge=1, description="A digest not delivered by then is not sent any more [h].")
    batch: int = Field(50, ge=1, le=64, description="Messages marked and recorded together.")


class WebSettings(_Group):
    base_url: str = Field(
        "http://localhost:8765", pattern=_LINK, description="How readers reach the pages, without a final slash."
    )
    host: str = Field("127.0.0.1", description="The address the pages listen on.")
    port: int = Field(8765, ge=1, le=65535, description="The port the pages listen on.")
    show_days: int = Field(120, ge=1, le=40_000, description="How long the link in a digest opens it as a page [days].")


class Settings(BaseSettings):
    """All settings, by group; frozen once read."""

    model_config = SettingsConfigDict(env_prefix="LEAFTURN_", env_nested_delimiter="__", frozen=True, extra="forbid")

    data_dir: str = Field("var", description="Where files of the service's own are kept.")
    keys_file: str = Field(
        "var/keys", description="The keys that sign links, one a line, newest first; keep the old ones."
    )
    store: StoreSettings = StoreSettings()
    mail: MailSettings = MailSettings()
    delivery: DeliverySettings = DeliverySettings()
    web: WebSettings = WebSettings()

    @classmethod
    def settings_customise_sources(
        cls,
        settings_cls: type[BaseSettings],
        init_settings: PydanticBaseSettingsSource,
        env_settings: PydanticBaseSettingsSource,
        dotenv_settings: PydanticBaseSettingsSource,
        file_secret_settings: PydanticBaseSettingsSource,
    ) -> tuple[PydanticBaseSettingsSource, ...]:
        return env_settings, init_settings


def read(path: Path | None = None) -> Settings:
    """Read the settings once. Without a path, `leafturn.toml` of the working folder, if there is one."""
    file = path or Path(FILE_NAME)
    values: dict[str, Any] = {}
    if file.exists():
        try:
            values = tomllib.loads(file.read_text(encoding="utf-8"))
        except (tomllib.TOMLDecodeError, UnicodeDecodeError, OSError) as error:
            raise BadSettings(
                f"{file} can't be read as TOML: {error}. Mend that line, or run: leafturn init"
            ) from error
    elif path is not None:
        raise BadSettings(f"there is no settings file {file}. Make one with: leafturn init {file}")
    try:
        return _anchored(Settings(**values), file.parent)
    except SettingsError as error:
        raise BadSettings(
            f"the environment can't be used: {error}. Set one value of a group: LEAFTURN_STORE__URL"
        ) from error
    except ValidationError as error:
        raise BadSettings(_in_words(error, file)) from error


def _in_words(error: ValidationError, file: Path) -> str:
    lines = []
    for problem in error.errors():
        name = ".".join(str(part) for part in problem["loc"])
        if problem["type"] == "extra_forbidden":
            lines.append(f"{name}: there is no such setting; remove it, or check its spelling")
        else:
            hidden = name in _SECRET or isinstance(problem["input"], dict | list)
            given = "" if hidden else f" (given: {problem['input']!r})"
            lines.append(f"{name}: {problem['msg'].lower()}{given}")
    return f"settings from {file} and the environment can't be used:\n  " + "\n  ".join(lines)


def _anchored(read: Settings, folder: Path) -> Settings:
    """Settings whose paths are taken from a folder."""

    def from_there(path: str) -> str:
        return str(folder / path) if path else path

    kind, slashes, path = read.store.url.partition(":///")
    in_a_file = kind.startswith("sqlite") and path and not path.startswith((":memory:", "file:"))
    url = f"{kind}{slashes}{from_there(path)}" if in_a_file else read.store.url
    return read.model_copy(
        update={
            "data_dir": from_there(read.data_dir),
            "keys_file": from_there(read.keys_file),
            "store": read.store.model_copy(update={"url": url}),
            "mail": read.mail.model_copy(update={"password_file": from_there(read.mail.password_file)}),
        }
    )


def write_new(file: Path, text: str) -> bool:
    """Write a file that only its owner may read: all of it or nothing. False, and no change, where there is one."""
    file.parent.mkdir(parents=True, exist_ok=True)
    handle, partial = tempfile.mkstemp(dir=file.parent, prefix=f".{file.name}-")
    try:
        with os.fdopen(handle, "w", encoding="utf-8") as opened:
            opened.write(text)
            opened.flush()
            os.fsync(opened.fileno())
        os.link(partial, file)
    except FileExistsError:
        return False
    finally:
        os.unlink(partial)
    return True


def keys(settings: Settings) -> list[str]:
    """The keys that sign links, newest first; made on first use with mode 0600."""
    file = Path(settings.keys_file)
    try:
        if not file.exists():
            write_new(file, secrets.token_urlsafe(48) + "\n")  # of two who make them at once, both use the first's
        lines = file.read_text(encoding="utf-8").splitlines()
    except (OSError, UnicodeDecodeError) as error:
        raise BadSettings(f"keys_file can't be used: {error}. Name a file that this service may write") from error
    found = [line.strip() for line in lines if line.strip()]
    if not found or any(len(key) < 32 for key in found):
        raise BadSettings(f"keys_file {file} needs a key of 32 characters or more on each line")
    return found


def mail_password(settings: Settings) -> str:
    """The mail server's password, from its file if one is named."""
    if settings.mail.password_file:
        try:
            return Path(settings.mail.password_file).read_text(encoding="utf-8").strip()
        except (OSError, UnicodeDecodeError) as error:
            raise BadSettings(f"mail.password_file can't be read: {error}. Name a file that holds it") from error
    return settings.mail.password


def table() -> Iterator[tuple[str, str, Any, str]]:
    """Name, type, default and help of every setting, in the order of the file."""
    for name, info in Settings.model_fields.items():
        if isinstance(info.default, _Group):
            for inner, field in type(info.default).model_fields.items():
                yield f"{name}.{inner}", _type_words(field.annotation), field.default, field.description or ""
        else:
            yield name, _type_words(info.annotation), info.default, info.description or ""


def _type_words(annotation: Any) -> str:
    words = {str: "text", int: "whole number", float: "number"}
    return words.get(annotation) or " or ".join(repr(choice) for choice in annotation.__args__)


def commented_file() -> str:
    """A settings file that names every setting, its meaning and its default."""
    lines = ["# Leafturn settings. Every line shows a default; take the # away to change one.", ""]
    group = ""
    for name, kind, default, words in table():
        section, _, last = name.rpartition(".")
        if section != group:
            lines += ["", f"[{section}]"]
            group = section
        value = str(default) if isinstance(default, int | float) else f'"{default}"'
        lines += [f"# {words} ({kind})", f"# {last} = {value}"]
    return "\n".join(lines) + "\n"
