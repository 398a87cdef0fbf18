"""The sender that writes files: one for each message, whole, and the same one for the same message."""

import asyncio
from pathlib import Path

import pytest

from service.delivery.folder import FolderSender
from service.delivery.sender import Mail
from service.errors import MailDown
from service.store.base import Store
from tests.service.delivery.outgoing import put, run


def test_each_message_becomes_a_file(store: Store, tmp_path: Path) -> None:
    put(store, "r1", "r2")
    assert run(store, FolderSender(tmp_path / "out")) == {"sent": 2}
    files = list((tmp_path / "out").iterdir())
    assert [file.suffix for file in files] == [".eml", ".eml"]
    assert all(file.read_bytes().endswith(b"Look at your canola.\r\n") for file in files)


def test_a_repeated_message_replaces_its_own_file(tmp_path: Path) -> None:
    async def twice() -> None:
        sender = FolderSender(tmp_path)
        await sender.open()
        for body in (b"first", b"second"):
            await sender.send(Mail("a@b.example", "c@d.example", b"Message-ID: <same@x>\r\n\r\n" + body))

    asyncio.run(twice())
    [file] = tmp_path.iterdir()
    assert file.read_bytes().endswith(b"second")


def test_a_folder_that_can_not_be_made_is_said(tmp_path: Path) -> None:
    (tmp_path / "file").touch()
    with pytest.raises(MailDown, match="can't be made"):
        asyncio.run(FolderSender(tmp_path / "file" / "out").open())
