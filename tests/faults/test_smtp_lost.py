"""Conversations that break: nothing is lost, and nothing is repeated but what may not have arrived."""

import socket
from datetime import timedelta

import pytest
from aiosmtpd.smtp import SMTP

from service.delivery.smtp import SmtpSender
from service.errors import MailDown
from service.settings import MailSettings
from service.store.base import Store
from tests.builders import NOW
from tests.service.delivery.outgoing import history, put, run, states
from tests.smtp_server import DROP, DropsInData, Inbox, mail_settings, serving

LATER = NOW + timedelta(hours=1)


def test_a_server_that_is_down_leaves_all_in_the_queue(store: Store) -> None:
    put(store, "r1", "r2", "r3")
    with socket.create_server(("127.0.0.1", 0)) as taken:
        free = taken.getsockname()[1]
    sender = SmtpSender(MailSettings(port=free, starttls="never"))
    with pytest.raises(MailDown, match=f"127.0.0.1:{free} does not answer.*0 messages were sent; 3 stay"):
        run(store, sender)
    assert states(store) == {"queued": 3}
    assert history(store, "r1") == []  # it was never offered
    with serving(Inbox()) as server:
        assert run(store, SmtpSender(mail_settings(server))) == {"sent": 3}


def test_no_server_is_asked_for_where_nothing_is_due(store: Store) -> None:
    put(store)
    assert run(store, SmtpSender(MailSettings(port=1, starttls="never"))) == {}


def test_a_server_that_goes_away_half_way_leaves_the_rest(store: Store) -> None:
    put(store, *(f"r{n}" for n in range(20)))
    inbox = Inbox()

    def closes_after_five(_: str) -> str | None:
        if len(inbox.received) < 5:
            return None
        server.stop()
        return "421 closing down"

    inbox._on_data = closes_after_five
    with serving(inbox) as server, pytest.raises(MailDown, match="5 messages were sent; 15 stay"):
        run(store, SmtpSender(mail_settings(server, connections=1)))
    found = states(store)
    assert found == {"sent": 5, "deferred": 1, "queued": 14}
    with serving(inbox := Inbox()) as server:
        assert run(store, SmtpSender(mail_settings(server)), at=LATER) == {"sent": 15}
    assert max(inbox.message_ids.values()) == 1


def test_a_slow_server_is_waited_for(store: Store) -> None:
    put(store, *(f"r{n}" for n in range(8)))
    inbox = Inbox(late_s=0.3)
    with serving(inbox) as server:
        assert run(store, SmtpSender(mail_settings(server, connections=8))) == {"sent": 8}
    assert len(inbox.received) == 8


def test_an_answer_that_never_comes_is_doubtful_and_sent_again_with_the_same_id(store: Store) -> None:
    put(store, "r1")
    with serving(first := Inbox(late_s=0.9)) as server:
        assert run(store, SmtpSender(mail_settings(server, timeout_s=0.3))) == {"doubtful": 1}
    assert states(store) == {"deferred": 1}
    with serving(second := Inbox()) as server:
        assert run(store, SmtpSender(mail_settings(server)), at=LATER) == {"sent": 1}
    assert history(store, "r1") == [("doubtful", None), ("accepted", 250)]
    assert first.message_ids == second.message_ids


def test_a_connection_dropped_after_the_final_dot_is_doubtful(store: Store) -> None:
    put(store, "r1", "r2")
    answers = iter([DROP, None, None])
    inbox = Inbox(on_data=lambda _: next(answers))
    with serving(inbox) as server:
        sender = SmtpSender(mail_settings(server, connections=1))
        assert run(store, sender) == {"doubtful": 1, "sent": 1}
        assert run(store, sender, at=LATER) == {"sent": 1}
    assert sorted(inbox.message_ids.values()) == [1, 2]  # the doubtful one had arrived
    assert history(store, "r2") == [("accepted", 250)]


def test_held_doubtful_messages_wait_for_a_person(store: Store) -> None:
    put(store, "r1")
    inbox = Inbox(on_data=lambda _: DROP)
    with serving(inbox) as server:
        sender = SmtpSender(mail_settings(server))
        assert run(store, sender, doubtful="hold") == {"doubtful": 1}
        assert run(store, sender, doubtful="hold", at=LATER) == {"doubtful": 1}
        assert states(store) == {"sending": 1}
        assert len(inbox.received) == 1
        inbox._on_data = None
        assert run(store, sender, at=LATER) == {"doubtful": 1, "sent": 1}
    assert history(store, "r1") == [("doubtful", None), ("accepted", 250)]


def test_a_connection_dropped_in_the_message_is_doubtful_and_sent_once(store: Store) -> None:
    put(store, "r1")
    with serving(Inbox(), DropsInData) as server:
        assert run(store, SmtpSender(mail_settings(server))) == {"doubtful": 1}
    with serving(inbox := Inbox()) as server:
        assert run(store, SmtpSender(mail_settings(server)), at=LATER) == {"sent": 1}
    assert len(inbox.received) == 1


def test_a_connection_dropped_before_the_message_is_certain(store: Store) -> None:
    put(store, "r1")
    with serving(Inbox(on_rcpt=lambda _: DROP)) as server:
        assert run(store, SmtpSender(mail_settings(server))) == {"deferred": 1}
    assert history(store, "r1") == [("later", None)]


def test_a_connection_that_was_closed_between_messages_is_replaced(store: Store) -> None:
    put(store, "r1", "r2", "r3")
    inbox = Inbox()
    with serving(inbox, OneMessageEach) as server:
        assert run(store, SmtpSender(mail_settings(server, connections=1))) == {"sent": 3}
    assert inbox.connections == 3


def test_a_server_that_allows_one_connection_gets_one(store: Store) -> None:
    put(store, *(f"r{n}" for n in range(6)))
    inbox = Inbox(late_s=0.05)
    OneAtATime.busy = False
    with serving(inbox, OneAtATime) as server:
        assert run(store, SmtpSender(mail_settings(server, connections=4))) == {"sent": 6}
    assert inbox.connections == 1


class OneMessageEach(SMTP):
    """Closes each connection, without a word, after its first message."""

    async def smtp_DATA(self, arg: str) -> None:
        await super().smtp_DATA(arg)
        self._writer.close()


class OneAtATime(SMTP):
    """Turns away whoever comes while another is being served."""

    busy = False

    async def _handle_client(self) -> None:
        if OneAtATime.busy:
            await self.push("421 too many connections")
            self._writer.close()
            return
        OneAtATime.busy = True
        await super()._handle_client()
