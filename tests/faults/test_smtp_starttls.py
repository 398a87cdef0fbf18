"""Mail travels under TLS or not at all, unless the settings say otherwise."""

import pytest

from service.delivery.smtp import SmtpSender
from service.errors import MailDown
from service.store.base import Store
from tests.service.delivery.outgoing import put, run, states
from tests.smtp_server import Inbox, mail_settings, serving, tls


def test_starttls_covers_the_message(store: Store) -> None:
    put(store, "r1", "r2")
    server_side, client_side = tls()
    with serving(inbox := Inbox(), tls_context=server_side, require_starttls=True) as server:
        sender = SmtpSender(mail_settings(server, starttls="required"), tls_context=client_side)
        assert run(store, sender) == {"sent": 2}
    assert [received.over_tls for received in inbox.received] == [True, True]


def test_without_starttls_on_offer_nothing_is_sent(store: Store) -> None:
    put(store, "r1")
    with serving(inbox := Inbox()) as server:
        sender = SmtpSender(mail_settings(server, starttls="required"))
        with pytest.raises(MailDown, match=r"does not offer STARTTLS.*1 stay in the outbox"):
            run(store, sender)
    assert inbox.received == []
    assert states(store) == {"queued": 1}


def test_an_unknown_certificate_is_not_trusted(store: Store) -> None:
    put(store, "r1")
    server_side, _ = tls()
    with serving(inbox := Inbox(), tls_context=server_side) as server:
        sender = SmtpSender(mail_settings(server, starttls="required"))
        with pytest.raises(MailDown, match=r"certificate .* can't be trusted"):
            run(store, sender)
    assert inbox.received == []
    assert states(store) == {"queued": 1}


def test_a_wrong_password_is_said_and_nothing_is_sent(store: Store) -> None:
    put(store, "r1")
    server_side, client_side = tls()
    with serving(inbox := Inbox(), tls_context=server_side) as server:
        settings = mail_settings(server, starttls="required", user="leafturn")
        sender = SmtpSender(settings, password="wrong", tls_context=client_side)
        with pytest.raises(MailDown, match="refused the user name or password: 535"):
            run(store, sender)
    assert inbox.received == []
    assert states(store) == {"queued": 1}
