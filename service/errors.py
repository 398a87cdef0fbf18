"""Everything that can go wrong, drawn once.

LeafturnError
├── Refused              the input or the request can't be taken as it is (exit 1)
│   ├── BadInput         rows of a file, with what to mend in each
│   ├── BadSettings      a setting has a value that can't be used
│   ├── UnsafeText       words that no reader may be sent
│   ├── NotFound         nothing of that name
│   ├── WrongState       the thing is there, but not in a state that allows this
│   └── BadToken         a link that is expired, altered, or made for something else
└── Unreachable          a service this needs did not answer (exit 3); trying again can help
    ├── StoreBusy        the store is held by another writer
    ├── StoreDown        the store can't be opened
    └── MailDown         the mail server does not answer
"""

from collections.abc import Sequence
from typing import ClassVar

from rules.records import Refusal


class LeafturnError(Exception):
    """Base of all: says what happened in words for a person, and whether trying again can help."""

    permanent: ClassVar[bool] = True
    exit_code: ClassVar[int] = 1


class Refused(LeafturnError):
    """The input or the request can't be taken as it is; nothing was half-written."""


class BadInput(Refused):
    """A file, or rows of it, can't be taken."""

    def __init__(self, message: str, refusals: Sequence[Refusal] = ()) -> None:
        super().__init__(message)
        self.refusals = tuple(refusals)


class BadSettings(Refused):
    """A setting has a value that can't be used; names the setting and the remedy."""


class UnsafeText(Refused):
    """Text meant for readers holds words that may not be sent; `marks` are (where, word, reason)."""

    def __init__(self, message: str, marks: Sequence[tuple[str, str, str]] = ()) -> None:
        super().__init__(message)
        self.marks = tuple(marks)


class NotFound(Refused):
    """Nothing of that name; says what there is instead."""


class WrongState(Refused):
    """The thing exists, but its state does not allow this step."""


class BadToken(Refused):
    """A link that has expired, was altered, or was made for another purpose."""


class Unreachable(LeafturnError):
    """A service this step needs did not answer."""

    permanent = False
    exit_code = 3


class StoreBusy(Unreachable):
    """Another writer holds the store; waited as long as the settings allow."""


class StoreDown(Unreachable):
    """The store can't be opened or reached."""


class MailDown(Unreachable):
    """The mail server does not answer or refuses the conversation."""
