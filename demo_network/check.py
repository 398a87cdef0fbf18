"""Read the delivered mail and hold it against the list of what was planted.

Only the mail's plain text counts, as a reader would see it: which pest a sentence is about is told by the
pest that was named last before it.
"""

import csv
import mailbox
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from email.message import Message
from email.utils import parsedate_to_datetime
from pathlib import Path
from zoneinfo import ZoneInfo

from demo_network.event import Event
from demo_network.finds import CUTWORM, FLEA, MITE
from demo_network.network import DISTRICTS, Spot
from demo_network.planted import EVENTS
from service.clock import iso_week

# what a mail says where it states that kind, or that artefact by its name; a kind that is not here is waiting
SAID = {
    "hatch": "the weather this hatch needs has likely come",
    "threshold": "at or above the number",
    "first_seen": "first this season",
    "busy_looking": "more looking than usual",
    "one_reporter": "came from one person",
}
PLURALS = {"redlegged earth mites": MITE, "lucerne fleas": FLEA, "cutworms": CUTWORM}
_TOLD = re.compile("|".join(map(re.escape, [*PLURALS, *SAID.values()])))


@dataclass(frozen=True)
class Reader:
    """Where a reader is: the postcode's town, and each paddock of theirs."""

    id: str
    district: str
    spots: tuple[Spot, ...]

    def within(self, event: Event) -> bool:
        if self.district != event.district:
            return False
        return any(spot.km_from(event.latitude, event.longitude) <= event.radius_km for spot in self.spots)


@dataclass(frozen=True)
class Mail:
    """One delivered digest: to whom, for which week, and what it says of which pest."""

    key: str  # in the Maildir
    recipient: str
    week: str
    said: frozenset[tuple[str, str]]  # (phrase, pest)


def check(maildir: Path, files: Path) -> dict[str, list[str]]:
    """What the delivered mail of a Maildir states of what was planted in the files."""
    readers = readers_of(files)
    return judge(list(delivered(maildir, readers)), readers)


def judge(mails: Sequence[Mail], readers: Mapping[str, Reader]) -> dict[str, list[str]]:
    """Names of the planted events that these mails state, miss, or can't state yet, and of the artefacts."""
    built = [event for event in EVENTS if event.telling in SAID]
    seen = {event.name for event in built if any(states(mail, event, readers) for mail in mails)}
    return {
        "planted_found": [event.name for event in built if not event.artefact and event.name in seen],
        "planted_missed": [event.name for event in built if not event.artefact and event.name not in seen],
        "planted_waiting": [event.name for event in EVENTS if event not in built],
        "artefacts_flagged": [event.name for event in built if event.artefact and event.name in seen],
    }


def states(mail: Mail, event: Event, readers: Mapping[str, Reader]) -> bool:
    """Whether this mail told a reader in the event's circle of it, in one of its weeks."""
    if mail.week not in event.weeks or (SAID[event.telling], event.pest) not in mail.said:
        return False
    return readers[mail.recipient].within(event)


# --- the mail ------------------------------------------------------------------------------------


def delivered(maildir: Path, readers: Mapping[str, Reader]) -> Iterator[Mail]:
    """Every digest in the Maildir that went to a known reader."""
    for key, message in mailbox.Maildir(maildir, factory=None, create=False).iteritems():
        recipient = str(message["To"]).strip("<>")
        if recipient not in readers:
            raise ValueError(f"the mail {key} went to {recipient}, who is no reader of the demo")
        zone = ZoneInfo(DISTRICTS[readers[recipient].district].zone)
        sent = parsedate_to_datetime(str(message["Date"])).astimezone(zone)
        yield Mail(key, recipient, iso_week(sent.date()), said(plain_text(message)))


def plain_text(message: Message) -> str:
    """The text part of a mail."""
    part = next(part for part in message.walk() if part.get_content_type() == "text/plain")
    return bytes(part.get_payload(decode=True)).decode(part.get_content_charset("utf-8"))


def said(text: str) -> frozenset[tuple[str, str]]:
    """Each telling phrase of a text, with the pest that was named last before it."""
    found, pest = set(), ""
    for match in _TOLD.finditer(" ".join(text.lower().split())):
        if match[0] in PLURALS:
            pest = PLURALS[match[0]]
        else:
            found.add((match[0], pest))
    return frozenset(found)


# --- the readers ---------------------------------------------------------------------------------


def readers_of(files: Path) -> dict[str, Reader]:
    """Readers by their address, from the files as written."""
    network = files / "network"
    towns = {row["code"]: _spot(row) for row in _rows(network / "postcodes.csv")}
    paddocks = {row["id"]: _spot(row) for row in _rows(network / "paddocks.csv")}
    return {
        row["email"]: Reader(
            row["id"],
            row["district"],
            (towns[row["postcode"]], *(paddocks[id] for id in row["paddocks"].split(";") if id)),
        )
        for row in _rows(network / "subscribers.csv")
    }


def _spot(row: Mapping[str, str]) -> Spot:
    return Spot(float(row["latitude"]), float(row["longitude"]), float(row["elevation_m"]))


def _rows(path: Path) -> Sequence[Mapping[str, str]]:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))
