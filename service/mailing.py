"""From slips to what is signed and sent: heads, canonical forms, the gate, outbox rows, mails and pages.

What is sent is what was signed: a digest that no longer renders to the bytes that were frozen is not sent.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta
from functools import lru_cache

from rules.book import Book
from rules.digests import digest
from rules.records import Known, Subscriber
from rules.slip import SHOW_LINK, UNSUBSCRIBE_LINK, Edition, Head, Rendered, Slip, Statement
from service.clock import Clock
from service.delivery import mime
from service.delivery.sender import Mail, Skip
from service.editions import gate, render, wording
from service.editions.compose import Composed
from service.editions.many import Composers
from service.errors import NotFound, Refused, WrongState
from service.settings import Settings
from service.shipped import code_hash
from service.store import editions, network
from service.store.base import Store
from service.store.leases import Job
from service.store.outbox import Outgoing, message_id
from service.tokens import Tokens

Progress = Callable[[int, int | None, str], None] | None
MANY = 8_000  # digests: from here on two processes, about a second to start, overtake one (measured on 2 cores)
TRIED = 20  # digests that are said again before any is sent
LONGEST_NOTE = 1500  # characters: a few words of the coordinator's own


# --- what an edition freezes --------------------------------------------------------------------


def head(edition: str, known: Known, signed_by: str = "", note: str = "") -> Head:
    """What every digest of an edition shares, as it is when it is drafted or signed."""
    return Head(
        edition=edition,
        district=known.district.name,
        day=known.today,
        holdings_to_hide=known.district.holdings_to_hide,
        warm_half=wording.warm_half(known.today, known.district.latitude),
        signed_by=signed_by,
        note=note,
        attributions=tuple(sorted({each.attribution for each in known.stations.values() if each.attribution})),
    )


def hashes(book: Book) -> dict[str, str]:
    """The names of everything besides rows that decides what a digest says."""
    return {
        "rules": digest(book.rules),
        "catalogue": book.catalogue_hash,
        "templates": render.templates_hash(),
        "renderer": render.RENDERER,
        "code": code_hash("rules", "service.signals", "service.editions"),
    }


def changed(edition: Edition, now: dict[str, str]) -> list[str]:
    """Which of the frozen hashes are others now."""
    return sorted(name for name, value in now.items() if edition.hashes.get(name) != value)


def expect_same(edition: Edition, now: dict[str, str]) -> None:
    """WrongState where rules, catalogue or templates were changed since the draft."""
    if names := changed(edition, now):
        raise WrongState(f"since edition {edition.id} was drafted, {', '.join(names)} changed; draft it again")


def expect_sendable(store: Store, id: str, book: Book) -> None:
    """WrongState where this version of the program would say a signed edition in other words than were signed."""
    with store.reading() as c:
        edition = editions.get(c, id)
    if edition.state not in ("signed", "sent"):
        return
    others = [name for name in changed(edition, hashes(book)) if name != "code"]  # code shows in the bytes, or not
    if others or _all_said_otherwise(store, edition, book):
        what = ", ".join(others) or "what a digest says has"
        remedy = "nothing was sent; send it with the version of this program that signed it"
        raise WrongState(f"since edition {id} was signed, {what} changed; {remedy}")


def _all_said_otherwise(store: Store, edition: Edition, book: Book) -> bool:
    """Whether each of the first digests would be other bytes; if only some are, they were altered by themselves."""
    with store.reading() as c:
        statements = editions.statements(c, edition.id)
        first = next(editions.slips(c, edition.id, size=TRIED), [])
    same = (canonical_hash(_rendered(edition, kept.slip, statements, book)) == kept.canonical_hash for kept in first)
    return bool(first) and not any(same)


def canonical_hash(rendered: Rendered) -> str:
    """The name of a digest's canonical form."""
    return digest(rendered)


# --- signing ------------------------------------------------------------------------------------


def render_all(
    edition: Edition,
    composed: Composed,
    book: Book,
    known: Known,
    readers: Sequence[Subscriber],
    more_names: frozenset[str],
    progress: Progress,
    processes: int = 0,
) -> dict[str, str]:
    """The canonical hash of every reader's digest; UnsafeText if the gate marks a word in any of them.

    `more_names` are names that came after the draft, which a note could hold. Many digests are read on all
    cores, unless `processes` says on how many.
    """
    if len(edition.note) > LONGEST_NOTE:
        raise Refused(f"the note has {len(edition.note)} characters; shorten it to {LONGEST_NOTE}, to be read in a ute")
    named = names(known) | more_names
    gate.refuse({"note": edition.note}, named, _public(known))
    shared = _Reading(edition, composed.statements, book, named, allowed(None, edition.head, known))
    items = ((composed.slips[reader.id], _own(reader, known)) for reader in readers)
    found = {}
    with Composers(_read, shared, processes or (0 if len(readers) > MANY else 1)) as composers:
        for reader, hash in zip(readers, composers.each(items), strict=True):
            found[reader.id] = hash
            if progress:
                progress(len(found), len(readers), "Reading every digest once more")
    return found


@dataclass(frozen=True, slots=True)
class _Reading:
    """What the reading of all digests of an edition shares."""

    edition: Edition
    statements: Mapping[str, Statement]
    book: Book
    named: frozenset[str]
    allowed: frozenset[str]


def _read(shared: _Reading, item: tuple[Slip, frozenset[str]]) -> str:
    """The canonical hash of one digest that passed the gate; `item` has the slip and the reader's own names."""
    slip, own = item
    rendered = _rendered(shared.edition, slip, shared.statements, shared.book)
    texts = {f"{slip.subscriber} {where}": text for where, text in gate.texts_of(rendered).items()}
    gate.refuse(texts, shared.named, shared.allowed | own)
    return canonical_hash(rendered)


def names(known: Known) -> frozenset[str]:
    """People, farms and paddocks that no reader may see named."""
    people = {each.name for each in known.people.values()}
    return frozenset(people | {e.name for e in known.holdings.values()} | {e.name for e in known.paddocks.values()})


def allowed(reader: Subscriber | None, head: Head, known: Known) -> frozenset[str]:
    """What a reader may see named: public places, who signed, and their own paddocks."""
    own = _own(reader, known) if reader else frozenset()
    return _public(known) | own | ({head.signed_by} - {""})


def _own(reader: Subscriber, known: Known) -> frozenset[str]:
    return frozenset(known.paddocks[id].name for id in reader.paddocks if id in known.paddocks)


def _public(known: Known) -> frozenset[str]:
    attributions = {each.attribution for each in known.stations.values() if each.attribution}
    return frozenset({known.district.name, *(each.name for each in known.postcodes.values()), *attributions})


def outgoing(edition: Edition, reader: Subscriber, settings: Settings, now: datetime) -> Outgoing:
    """The outbox row of one reader's digest."""
    key = f"{edition.id}:{reader.id}"
    return Outgoing(
        kind="edition",
        key=key,
        district=edition.district,
        subscriber=reader.id,
        domain=reader.email.rpartition("@")[2].lower(),
        message_id=message_id("edition", key, _host(settings)),
        due=now,
        expires_at=now + timedelta(hours=settings.delivery.expires_h),
        edition=edition.id,
    )


def _host(settings: Settings) -> str:
    return settings.mail.sender.rpartition("@")[2] or "localhost"


# --- one digest from the store ------------------------------------------------------------------


def digest_text(store: Store, id: str, reader: str, book: Book) -> str:
    """One reader's digest as plain text, subject first."""
    edition, slip, statements = _of_reader(store, id, reader)
    rendered = _rendered(edition, slip, statements, book)
    return f"Subject: {rendered.subject}\n\n{rendered.text}"


def digest_page(store: Store, id: str, reader: str, book: Book, links: "Links") -> str:
    """One reader's digest as a page, with its links."""
    edition, slip, statements = _of_reader(store, id, reader)
    page = render.page(wording.view(slip, statements, edition.head, book))
    page = page.replace(SHOW_LINK, links.show(id, reader))
    return page.replace(UNSUBSCRIBE_LINK, links.unsubscribe(reader))


def kept(store: Store, id: str, reader: str) -> tuple[Slip, dict[str, Statement], str | None]:
    """A reader's slip, the statements it may refer to, and its canonical hash once signed."""
    with store.reading() as c:
        found = editions.get_slip(c, id, reader)
        if found is None:
            raise NotFound(
                f"edition {id} holds no digest of {reader!r}: it had none, or the reader's data were deleted"
            )
        return found[0], editions.statements(c, id), found[1]


def _of_reader(store: Store, id: str, reader: str) -> tuple[Edition, Slip, dict[str, Statement]]:
    with store.reading() as c:
        edition = editions.get(c, id)
    slip, statements, _ = kept(store, id, reader)
    return edition, slip, statements


def _rendered(edition: Edition, slip: Slip, statements: Mapping[str, Statement], book: Book) -> Rendered:
    return render.render(wording.view(slip, statements, edition.head, book))


# --- sending ------------------------------------------------------------------------------------


class Links:
    """The links of one moment that a reader's mail or page carries."""

    def __init__(self, settings: Settings, tokens: Tokens, at: datetime) -> None:
        self._base, self._tokens, self._at = settings.web.base_url.rstrip("/"), tokens, at

    def show(self, edition: str, reader: str) -> str:
        return f"{self._base}/show/{self._tokens.make('show', f'{edition}:{reader}', self._at)}"

    def unsubscribe(self, reader: str) -> str:
        return f"{self._base}/unsubscribe/{self._tokens.make('unsubscribe', reader, self._at)}"


class Mailer:
    """Composes the mail of one job after another; what an edition's digests share is read once."""

    def __init__(
        self, store: Store, settings: Settings, tokens: Tokens, clock: Clock, book_of: Callable[[str], Book]
    ) -> None:
        self._store, self._settings, self._tokens, self._clock = store, settings, tokens, clock
        self._book_of = book_of
        self._shared = lru_cache(maxsize=4)(self._read_shared)

    def __call__(self, job: Job) -> Mail | Skip:
        """The mail of a job, or why it is not sent after all. Consent is looked at here for the last time."""
        id = str(job.edition)
        with self._store.reading() as c:
            reader = network.get_subscriber(c, job.subscriber)
            found = editions.get_slip(c, id, job.subscriber)
        if reader is None or found is None:
            return Skip("the reader's data were deleted")
        if reader.state != "confirmed":
            return Skip(f"the reader's mails are stopped ({reader.state})")
        edition, statements, book = self._shared(id)
        rendered = _rendered(edition, found[0], statements, book)
        if canonical_hash(rendered) != found[1]:
            raise WrongState("the digest would no longer be what was signed; draft and sign it again")
        return Mail(self._settings.mail.sender, reader.email, self._message(job, id, reader, rendered))

    def _message(self, job: Job, id: str, reader: Subscriber, rendered: Rendered) -> bytes:
        mail, now = self._settings.mail, self._clock.now()
        links = Links(self._settings, self._tokens, now)
        return mime.build(
            rendered=rendered,
            sender=mail.sender,
            sender_name=mail.sender_name,
            recipient=reader.email,
            message_id=job.message_id,
            date=now,
            show_url=links.show(id, reader.id),
            unsubscribe_url=links.unsubscribe(reader.id),
            list_id=f"{job.district}.{_host(self._settings)}",
        )

    def _read_shared(self, id: str) -> tuple[Edition, dict[str, Statement], Book]:
        with self._store.reading() as c:
            return editions.get(c, id), editions.statements(c, id), self._book_of(id)
