"""A sender that writes each message into a folder as an .eml file, for looking at or carrying away."""

import asyncio
import hashlib
import os
import re
from pathlib import Path

from service.delivery.sender import Answer, Mail, Outcome
from service.errors import MailDown

_MESSAGE_ID = re.compile(rb"^message-id:\s*<([^>\r\n]+)>", re.IGNORECASE | re.MULTILINE)


class FolderSender:
    """Writes files durably. The same message, sent again, replaces its own file."""

    connections = 1
    longest_s = 60.0

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    async def open(self) -> None:
        try:
            self.folder.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise MailDown(f"the mail folder {self.folder} can't be made: {error.strerror}") from error

    async def send(self, mail: Mail) -> Answer:
        try:
            name = await asyncio.to_thread(self._write, mail.data)
        except OSError as error:
            raise MailDown(f"the mail folder {self.folder} can't be written: {error.strerror}") from error
        return Answer(Outcome.ACCEPTED, f"written to {name}")

    async def close(self) -> None:
        """Nothing is held open between messages."""

    def _write(self, data: bytes) -> str:
        name = _file_name(data)
        part = self.folder / f".{name}.part"
        with part.open("wb") as file:
            file.write(data)
            file.flush()
            os.fsync(file.fileno())
        part.replace(self.folder / name)
        _sync_folder(self.folder)
        return name


def _file_name(data: bytes) -> str:
    found = _MESSAGE_ID.search(data.partition(b"\r\n\r\n")[0])
    return hashlib.sha256(found[1] if found else data).hexdigest()[:32] + ".eml"


def _sync_folder(folder: Path) -> None:
    """A renamed file is durable once its folder is."""
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
