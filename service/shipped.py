"""The one way to files that ship with the code: templates beside the checkout, or inside the wheel."""

import hashlib
from functools import cache
from importlib.resources import files
from importlib.resources.abc import Traversable
from pathlib import Path


def shipped(*parts: str) -> Traversable:
    """A shipped file or folder, such as `shipped("templates", "email")` or `shipped("catalogue")`."""
    if parts[0] == "catalogue":
        return files("rules").joinpath(*parts)
    inside = files("service").joinpath("_shipped", *parts)
    if inside.is_dir() or inside.is_file():
        return inside
    return Path(str(files("service"))).parent.joinpath(*parts)


@cache
def code_hash(*packages: str) -> str:
    """The short hash of the source files of some packages: what tells one version of their code from another."""
    seen = hashlib.sha256()
    for package in packages:
        for file in sorted(Path(str(files(package))).rglob("*.py")):
            seen.update(f"{package}/{file.name}\n".encode() + file.read_bytes())
    return seen.hexdigest()[:32]
