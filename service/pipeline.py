"""The story of a week, top to bottom: each step is a plain function that runs once and says what it did.

    init ─► take ─► run_rules ─► draft ─► show, hold ─► sign ─► send ─► trail

The command line, the pages and the demo call these and nothing below them. Only this file knows the order.
"""

from collections.abc import Iterator, Sequence
from contextlib import closing, contextmanager
from dataclasses import replace
from datetime import datetime, timedelta
from functools import cache
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit
from zoneinfo import ZoneInfo

from rules.book import Book
from rules.digests import plain
from rules.records import Known, Person, Signal
from rules.slip import Edition
from service import mailing, rulebook, showing, signals, tracing
from service import settings as settings_file
from service.clock import Clock, iso_week, local_day
from service.delivery import smtp, worker
from service.delivery.maildir_server import MaildirServer
from service.editions.compose import Composed, compose
from service.errors import Refused, WrongState
from service.known import know
from service.settings import Settings
from service.store import audit, editions, health, jobs, network, outbox, rules
from service.store import signals as signal_store
from service.store.base import Store, file_of
from service.taking import Outcome, Progress
from service.taking import open_store as open_store
from service.taking import take as take
from service.tokens import Tokens

LONGEST_STEP = timedelta(minutes=10)  # a step that is not finished by then may be taken over
SIGNERS = frozenset({"coordinator", "deputy"})


# --- before the first week ----------------------------------------------------------------------


def init(file: Path) -> Outcome:
    """Write a commented settings file, the link keys and the empty store; an existing file is kept."""
    if not settings_file.write_new(file, settings_file.commented_file()):
        raise Refused(f"{file} is there already; edit it, or name another file")
    settings = settings_file.read(file)
    settings_file.keys(settings)
    with closing(open_store(settings)) as store:
        return {"settings": str(file), "keys": settings.keys_file, "store": store.name, "next": "leafturn doctor"}


def store_file(settings: Settings) -> Path | None:
    """The file that the store is, if it is one."""
    return file_of(settings.store.url)


# --- what the rules say -------------------------------------------------------------------------


def run_rules(store: Store, district_id: str, *, clock: Clock, as_of: datetime | None = None) -> Outcome:
    """Run the live rules on what was knowable at a moment, now if none is given, and keep what they say."""
    moment = _now(store, clock)
    if as_of is not None:
        moment = as_of if as_of.tzinfo else as_of.replace(tzinfo=_zone(store, district_id, moment))
    with _claimed(store, "rules", district_id, clock) as done:
        _, _, found = _said(store, district_id, moment)
        with store.writing() as c:
            signal_store.save(c, found)
        done["signals"] = len(found)
    return {"district": district_id, "as_of": moment, "signals": [showing.signal_line(each) for each in found]}


# --- the edition --------------------------------------------------------------------------------


def draft(store: Store, district_id: str, *, clock: Clock, by: str = "leafturn") -> Outcome:
    """Draft this week's edition from what is knowable now. An unsigned draft of the week is replaced."""
    with _claimed(store, "draft", district_id, clock) as done:
        done |= _draft(store, district_id, _now(store, clock), by)
    return done


def _draft(store: Store, district_id: str, now: datetime, by: str) -> Outcome:
    known, book, found = _said(store, district_id, now)
    week = iso_week(known.today)
    edition = Edition(
        id=f"{district_id}-{week}",
        district=district_id,
        week=week,
        as_of=now,
        drafted_at=now,
        drafted_by=by,
        hashes=mailing.hashes(book),
        head=mailing.head(f"{district_id}-{week}", known),
    )
    with store.reading() as c:
        readers = network.subscribers(c, district_id)
    composed = compose(known, found, book, readers)
    with store.writing() as c:
        signal_store.save(c, found)
        lost = editions.save_draft(c, edition, composed.statements.values(), composed.slips.values(), readers)
        audit.add(c, who=by, at=now, what="draft", subject=edition.id, why="the week's edition")
    return {
        "edition": edition.id,
        "signals": len(found),
        "statements": len(composed.statements),
        "readers": len(readers),
        "with_asks": sum(bool(slip.asks) for slip in composed.slips.values()),
        "holds_to_look_at_again": lost,
    }


def show(store: Store, id: str, *, reader: str | None = None) -> Outcome:
    """An edition's statements in words, how many readers each touches, and what the gate marks; or one digest."""
    book = book_of(store, id)
    if reader is not None:
        return {"edition": id, "reader": reader, "digest": mailing.digest_text(store, id, reader, book)}
    with store.reading() as c:
        edition = editions.get(c, id)
    return showing.edition(store, id, book, know(store, book, edition.district, edition.as_of))


def hold(
    store: Store, id: str, statement: str | None, *, by: str, reason: str, clock: Clock, lift: bool = False
) -> Outcome:
    """Hold one statement of a draft, or the whole edition, with a reason that is kept; or lift such a hold."""
    now, what = clock.now(), "lift" if lift else "hold"
    with store.writing() as c:
        _signer(network.people(c, editions.get(c, id).district), by)
        if lift:
            editions.release(c, id, statement)
        elif statement is None:
            editions.hold_edition(c, id, reason=reason, by=by, at=now)
        else:
            editions.hold_statement(c, id, statement, reason=reason, by=by, at=now)
        audit.add(c, who=by, at=now, what=what, subject=f"{id} {statement or ''}".strip(), why=reason)
    return {"edition": id, what: statement or "the whole edition", "reason": reason}


def sign(
    store: Store,
    settings: Settings,
    id: str,
    *,
    by: str,
    clock: Clock,
    note: str = "",
    progress: Progress = None,
) -> Outcome:
    """Freeze recipients, statements and wording, and write the outbox. Nothing leaves before `send`.

    Everything is said again from the rows as they were known at the draft, without what is held, and every
    digest passes the gate first: one unsafe word anywhere, and nothing is signed.
    """
    now = clock.now()
    with store.reading() as c:
        edition = editions.get(c, id)
        held = frozenset(editions.held(c, id))
        signer = _signer(network.people(c, edition.district), by)
        readers = network.subscribers(c, edition.district)
    if edition.state != "draft":
        raise WrongState(f"edition {id} is {edition.state}; only a draft can be signed")
    known, book, found = _said(store, edition.district, edition.as_of)
    mailing.expect_same(edition, mailing.hashes(book))
    composed = compose(known, found, book, readers, held)
    signed = replace(edition, note=note, head=mailing.head(id, known, signer.name, note))
    names = showing.names_now(store, edition.district, now)
    canonical = mailing.render_all(signed, composed, book, known, readers, names, progress)
    rows = [mailing.outgoing(signed, reader, settings, now) for reader in readers]
    with store.writing() as c:
        editions.expect_as_read(c, edition, held)
        editions.save_draft(c, signed, composed.statements.values(), composed.slips.values(), readers)
        outbox.forget_unsigned(c, id)
        held = frozenset(editions.held(c, id))
    for start in range(0, len(readers), editions.PIECE):
        piece = slice(start, start + editions.PIECE)
        with store.writing() as c:
            editions.expect_as_read(c, signed, held)
            editions.set_canonical(c, id, {each.id: canonical[each.id] for each in readers[piece]})
            outbox.enqueue(c, rows[piece], now)
    with store.writing() as c:
        editions.expect_as_read(c, signed, held)
        editions.mark_signed(c, id, by=by, at=now)
        audit.add(c, who=by, at=now, what="sign", subject=id, why=note or "read and signed")
    return {"edition": id, "signed_by": signer.name, "slips": len(readers), "held": len(held)}


def send(
    store: Store, settings: Settings, id: str, *, clock: Clock, by: str = "leafturn", progress: Progress = None
) -> Outcome:
    """Let a signed edition go and deliver what is due; run again, it delivers what is left."""
    mailing.expect_sendable(store, id, book_of(store, id))
    with store.writing() as c:
        edition = editions.get(c, id)
        if edition.state != "sent":
            editions.mark_sent(c, id, by=by, at=clock.now())
            audit.add(c, who=by, at=clock.now(), what="send", subject=id, why="signed")
        waiting = sum(outbox.counts(c, id).get(state, 0) for state in outbox.WAITING)
    mailer = mailing.Mailer(store, settings, _tokens(settings), clock, lambda edition: book_of(store, edition))
    hello = urlsplit(settings.web.base_url).hostname or "localhost"
    sender = smtp.SmtpSender(settings.mail, password=settings_file.mail_password(settings), hello=hello)

    def moved(counts: Any) -> None:
        if progress:
            progress(sum(counts.values()), waiting, "Sending")

    counts = worker.deliver(store, sender, mailer, clock, settings, moved)
    with store.reading() as c:
        return {"edition": id, **counts, **showing.left_to_send(outbox.counts(c, id))}


@contextmanager
def mail_server(folder: Path) -> Iterator[MaildirServer]:
    """A real SMTP server on this machine that keeps every mail in a Maildir: for the demo, and for trying out."""
    with MaildirServer(folder) as server:
        yield server


# --- back ---------------------------------------------------------------------------------------


def trail(store: Store, id: str, reader: str, *, sentence: str | None = None) -> Outcome:
    """From a sentence back to figures, rule and rows, and the whole digest said again from the rows as they stand."""
    with store.reading() as c:
        edition = editions.get(c, id)
        held = frozenset(editions.held(c, id))
        kept = editions.reader_of(c, id, reader)

    def again() -> tuple[Known, Composed]:
        known, book, found = _said(store, edition.district, edition.as_of)
        return known, compose(known, found, book, [kept] if kept else [], held)

    return tracing.trail(store, edition, reader, book_of(store, id), again, sentence)


def book_of(store: Store, id: str) -> Book:
    """The rule book as an edition used it."""
    with store.reading() as c:
        return _book(store, editions.get(c, id).as_of)


class Pages:
    """What the pages ask for: the three things that a mailed link can do."""

    def __init__(self, store: Store, settings: Settings) -> None:
        self._store, self._settings, self._tokens = store, settings, _tokens(settings)

    def show(self, token: str, at: datetime) -> str:
        id, _, reader = self._tokens.read("show", token, at).rpartition(":")
        links = mailing.Links(self._settings, self._tokens, at)
        return mailing.digest_page(self._store, id, reader, book_of(self._store, id), links)

    def check_unsubscribe(self, token: str, at: datetime) -> None:
        self._tokens.read("unsubscribe", token, at)

    def unsubscribe(self, token: str, at: datetime) -> None:
        reader = self._tokens.read("unsubscribe", token, at)
        with self._store.writing() as c:
            for id in network.leave(c, reader):
                audit.add(c, who=reader, at=at, what="unsubscribe", subject=id, why="their own link")


# --- for the doctor -----------------------------------------------------------------------------


def examine_store(store: Store) -> tuple[bool, str, datetime | None]:
    """Whether the store is well, in words, and the newest moment that it has heard of."""
    return health.examine(store)


def examine_mail(settings: Settings) -> str:
    """A real greeting with the mail server, in words; MailDown where it does not answer."""
    return smtp.greet(settings.mail, settings_file.mail_password(settings))


# --- the same for several steps -----------------------------------------------------------------


def _said(store: Store, district_id: str, as_of: datetime) -> tuple[Known, Book, list[Signal]]:
    """What was knowable at a moment, the rules of that moment, and what they say of it."""
    book = _book(store, as_of)
    known = know(store, book, district_id, as_of)
    return known, book, signals.evaluate(known, book)


@contextmanager
def _claimed(store: Store, job: str, district_id: str, clock: Clock) -> Iterator[Outcome]:
    """One run of a step for a district at a time, from whatever shell; what it did is kept beside it."""
    now = clock.now()
    with store.writing() as c:
        due = local_day(now, network.get_district(c, district_id, now).zone)
        run = jobs.claim(c, job, district_id, due, now=now, lasts=LONGEST_STEP, again=True)
        if run is None:
            frees = jobs.get(c, job, district_id, due)
            until = f"{frees.expires_at:%H:%M} UTC" if frees else "a while"
            raise WrongState(f"another process is at this step for {district_id}; wait for it, or until {until}")
    done: Outcome = {}
    failed = True
    try:
        yield done
        failed = False
    finally:
        with store.writing() as c:
            jobs.finish(c, run, now=clock.now(), summary=plain(done), failed=failed)


def _book(store: Store, as_of: datetime) -> Book:
    with store.reading() as c:
        return rulebook.with_versions(_catalogue(), rules.versions(c, as_of))


@cache
def _catalogue() -> Book:
    return rulebook.load()


def _now(store: Store, clock: Clock) -> datetime:
    """A moment of which everything that was knowable is in the store: no take is still under way."""
    with store.arrivals():
        return clock.now()


def _zone(store: Store, district_id: str, as_of: datetime) -> ZoneInfo:
    with store.reading() as c:
        return ZoneInfo(network.get_district(c, district_id, as_of).zone)


def _tokens(settings: Settings) -> Tokens:
    return Tokens(settings_file.keys(settings), settings.web.show_days)


def _signer(people: Sequence[Person], by: str) -> Person:
    """The person who decides; a coordinator or deputy of the district."""
    for person in people:
        if person.id == by and SIGNERS & set(person.roles):
            return person
    who = ", ".join(person.id for person in people if SIGNERS & set(person.roles)) or "nobody yet; take a people file"
    raise Refused(f"{by!r} may not decide on this district's editions; who may: {who}")
