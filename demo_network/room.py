"""Folders that the demo may write to: empty ones, and those that it filled itself."""

import shutil
from collections.abc import Iterable
from pathlib import Path

from service.errors import Refused

MARK = "INVENTED.txt"


def make(folder: Path, parts: Iterable[str]) -> None:
    """Clear what an earlier run left under these names; nobody else's files are touched."""
    mark = folder / MARK
    if folder.exists() and any(folder.iterdir()) and not mark.exists():
        raise Refused(f"{folder} holds files that the demo did not write; name an empty folder")
    for part in parts:
        path = folder / part
        if path.is_dir():
            shutil.rmtree(path)
        else:
            path.unlink(missing_ok=True)
    folder.mkdir(parents=True, exist_ok=True)
    mark.write_text("Everything in this folder is invented; running the demo again replaces it.\n", encoding="utf-8")
