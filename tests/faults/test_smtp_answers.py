"""What a real server's answers lead to: accepted, try later, refused, greylisted."""

from datetime import timedelta

from service.delivery.smtp import SmtpSender
from service.store.base import Store
from tests.builders import NOW
from tests.service.delivery.outgoing import composed, history, put, run, states
from tests.smtp_server import Inbox, mail_settings, serving


def test_accepted_messages_are_sent_once_over_few_connections(store: Store) -> None:
    inbox = Inbox()
    put(store, *(f"r{n}" for n in range(30)))
    with serving(inbox) as server:
        sender = SmtpSender(mail_settings(server, connections=3))
        assert run(store, sender) == {"sent": 30}
        assert run(store, sender) == {}
    assert states(store) == {"sent": 30}
    assert len(inbox.received) == len(inbox.message_ids) == 30
    assert inbox.connections <= 3
    first = next(received for received in inbox.received if received.recipient == "r0@example.org")
    assert first.sender == "digest@leafturn.example"
    assert first.data.endswith(b"\r\n\r\nLook at your canola.\r\n")
    assert history(store, "r0") == [("accepted", 250)]


def test_a_4xx_answer_is_tried_again_after_five_minutes(store: Store) -> None:
    answers = iter(["451 try later", None])
    inbox = Inbox(on_data=lambda _: next(answers))
    put(store, "r1")
    with serving(inbox) as server:
        sender = SmtpSender(mail_settings(server))
        assert run(store, sender) == {"deferred": 1}
        assert run(store, sender, at=NOW + timedelta(minutes=4, seconds=59)) == {}
        assert run(store, sender, at=NOW + timedelta(minutes=5)) == {"sent": 1}
    assert [received.recipient for received in inbox.received] == ["r1@example.org"]
    assert history(store, "r1") == [("later", 451), ("accepted", 250)]


def test_greylisting_delays_each_reader_once(store: Store) -> None:
    seen: set[str] = set()

    def greylist(recipient: str) -> str | None:
        if recipient in seen:
            return None
        seen.add(recipient)
        return "450 4.7.1 greylisted"

    inbox = Inbox(on_rcpt=greylist)
    put(store, "r1", "r2", "r3")
    with serving(inbox) as server:
        sender = SmtpSender(mail_settings(server, connections=1))
        assert run(store, sender) == {"deferred": 3}
        assert run(store, sender, at=NOW + timedelta(minutes=5)) == {"sent": 3}
    assert inbox.connections == 2  # one for each run: a refused recipient leaves the connection usable


def test_a_5xx_answer_fails_that_message_and_no_other(store: Store) -> None:
    inbox = Inbox(on_rcpt=lambda address: "550 no such reader" if address.startswith("gone") else None)
    put(store, "r1", "gone", "r2")
    with serving(inbox) as server:
        sender = SmtpSender(mail_settings(server, connections=1))
        assert run(store, sender) == {"sent": 2, "failed": 1}
        assert run(store, sender, at=NOW + timedelta(days=1)) == {}
    assert history(store, "gone") == [("refused", 550)]


def test_a_message_that_no_server_takes_in_time_expires(store: Store) -> None:
    put(store, "r1")
    with serving(Inbox(on_data=lambda _: "452 full")) as server:
        sender = SmtpSender(mail_settings(server))
        assert run(store, sender) == {"deferred": 1}
        assert run(store, sender, at=NOW + timedelta(days=2)) == {"deferred": 1}
        assert run(store, sender, at=NOW + timedelta(days=3)) == {"expired": 1}
    assert states(store) == {"expired": 1}
    assert history(store, "r1") == [("later", 452), ("later", 452)]


def test_an_address_outside_ascii_is_sent_where_the_server_can(store: Store) -> None:
    put(store, "jürgen")
    inbox = Inbox()
    with serving(inbox) as server:
        assert run(store, SmtpSender(mail_settings(server))) == {"sent": 1}
    assert [received.recipient for received in inbox.received] == ["jürgen@example.org"]


def test_an_address_outside_ascii_fails_where_the_server_can_not(store: Store) -> None:
    put(store, "jürgen", "r1")
    inbox = Inbox()
    with serving(inbox, enable_SMTPUTF8=False) as server:
        assert run(store, SmtpSender(mail_settings(server))) == {"failed": 1, "sent": 1}
    assert [received.recipient for received in inbox.received] == ["r1@example.org"]


def test_an_address_that_would_break_out_of_its_command_is_refused(store: Store) -> None:
    put(store, "x> SIZE=1\r\nRCPT TO:<other")
    inbox = Inbox()
    with serving(inbox) as server:
        assert run(store, SmtpSender(mail_settings(server)), compose=composed) == {"failed": 1}
    assert inbox.received == []
