"""The local SMTP server: what is sent to it stands in its Maildir."""

import mailbox
from pathlib import Path

import pytest

from service.delivery.maildir_server import MaildirServer
from service.delivery.smtp import SmtpSender
from service.errors import MailDown
from service.store.base import Store
from tests.service.delivery.outgoing import put, run
from tests.smtp_server import mail_settings


def test_messages_are_kept_with_their_envelope(store: Store, tmp_path: Path) -> None:
    put(store, "r1", "r2", "jürgen")
    with MaildirServer(tmp_path / "mail" / "box") as server:
        assert run(store, SmtpSender(mail_settings(server))) == {"sent": 3}
    kept = [message.as_bytes() for message in mailbox.Maildir(tmp_path / "mail" / "box")]
    whole = [b"Return-Path: <digest@leafturn.example>" in data and b"Look at your canola." in data for data in kept]
    assert whole == [True, True, True]
    for reader in ("r1", "r2", "jürgen"):
        assert sum(f"Delivered-To: {reader}@example.org".encode() in data for data in kept) == 1


def test_a_port_that_is_taken_is_said(tmp_path: Path) -> None:
    with MaildirServer(tmp_path / "a") as server:
        second = MaildirServer(tmp_path / "b", port=server.port)
        with pytest.raises(MailDown, match=f"port {server.port}"):
            second.__enter__()
