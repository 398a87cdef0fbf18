"""What counts as found: the right words, about the right pest, to a reader in the circle, in its weeks."""

import mailbox
from datetime import UTC, datetime
from email.message import EmailMessage
from pathlib import Path

import pytest

from demo_network.check import check, said
from tests.demo_network.reading import rows

WED = {"2026-W19": 6, "2026-W20": 13, "2026-W21": 20, "2026-W22": 27}  # that week's Wednesday in May 2026
HATCH = """GO AND LOOK · 10 min
Redlegged earth mites in pasture
The weather this hatch needs has
likely come (Fri 17 Apr to Fri 15 May)."""
WAITING = ["moth_flight", "flare", "spread"]


@pytest.fixture
def maildir(tmp_path: Path) -> Path:
    mailbox.Maildir(tmp_path / "mail", create=True)
    return tmp_path / "mail"


def deliver(maildir: Path, files: Path, district: str, week: str, text: str) -> None:
    reader = next(row for row in rows(files / "network/subscribers.csv") if row["district"] == district)
    message = EmailMessage()
    message["To"] = reader["email"]
    message["Date"] = datetime(2026, 5, WED[week], 3, tzinfo=UTC)
    message.set_content(text)
    message.add_alternative("<p>a page</p>", subtype="html")
    mailbox.Maildir(maildir).add(message)


def test_no_mail_finds_nothing_and_says_what_waits(maildir: Path, files: Path) -> None:
    assert check(maildir, files) == {
        "planted_found": [],
        "planted_missed": ["hatch", "border", "first_find"],
        "planted_waiting": WAITING,
        "artefacts_flagged": [],
    }


def test_the_statement_to_a_reader_there_in_its_weeks_is_found(maildir: Path, files: Path) -> None:
    deliver(maildir, files, "sextant", "2026-W20", HATCH)
    assert check(maildir, files)["planted_found"] == ["hatch"]


@pytest.mark.parametrize(
    ("district", "week", "text"),
    [
        ("lantern", "2026-W20", HATCH),  # elsewhere
        ("sextant", "2026-W22", HATCH),  # too late
        ("sextant", "2026-W20", HATCH.replace("Redlegged earth mites", "Lucerne fleas")),  # of another pest
        ("sextant", "2026-W20", "Redlegged earth mites were found in 1 of 4 looks."),  # other words
    ],
)
def test_anything_less_is_missed(maildir: Path, files: Path, district: str, week: str, text: str) -> None:
    deliver(maildir, files, district, week, text)
    assert check(maildir, files)["planted_found"] == []


def test_mail_to_somebody_unknown_is_an_error(maildir: Path, files: Path) -> None:
    message = EmailMessage()
    message["To"], message["Date"] = "stranger@readers.example", datetime(2026, 5, 6, tzinfo=UTC)
    message.set_content(HATCH)
    mailbox.Maildir(maildir).add(message)
    with pytest.raises(ValueError, match="stranger"):
        check(maildir, files)


def test_a_phrase_belongs_to_the_pest_named_last_before_it() -> None:
    text = """COUNT IT
    Redlegged earth mites in canola
    At or above the number: ...
    KEEP IN MIND
    - Lucerne fleas: first this season, 5-10 km north
    WHAT OTHERS FOUND
    Redlegged earth mites: found in 3 of 9 looks.

    Most of these reports (8 of 9) came from one person."""
    assert said(text) == {
        ("at or above the number", "redlegged_earth_mite"),
        ("first this season", "lucerne_flea"),
        ("came from one person", "redlegged_earth_mite"),
    }
