"""Links: bound to one purpose, expiring, and still readable after the keys have been rotated.

A token is signed, not secret; it carries an id and never an address. A token made for one purpose is
refused for every other.
"""

from collections.abc import Sequence
from datetime import UTC, datetime, timedelta

from itsdangerous import BadSignature, URLSafeSerializer

from service.errors import BadToken

LIFETIMES: dict[str, timedelta | None] = {
    "unsubscribe": None,  # a way out must work for as long as the mail is kept
    "show": timedelta(days=120),  # unless the settings say otherwise
}
REMEDY = "Open the link in your newest digest instead."


class Tokens:
    """Makes and reads tokens with a list of keys, newest first; old keys still read, only the first signs."""

    def __init__(self, keys: Sequence[str], show_days: int = 120) -> None:
        if not keys or any(len(key) < 32 for key in keys):
            raise ValueError("tokens need at least one key of 32 characters or more")
        self._keys = list(reversed(keys))
        self._lifetimes = LIFETIMES | {"show": timedelta(days=show_days)}

    def make(self, purpose: str, subject: str, at: datetime) -> str:
        """A token that lets its holder do one thing to one subject."""
        return str(self._signer(purpose).dumps([subject, int(at.timestamp())]))

    def read(self, purpose: str, token: str, at: datetime) -> str:
        """The subject of a token; BadToken where it is altered, expired, or made for something else."""
        signer = self._signer(purpose)
        try:
            subject, made = signer.loads(token)
            made_at = datetime.fromtimestamp(int(made), UTC)
        except (BadSignature, ValueError, TypeError, OverflowError) as error:
            raise BadToken(f"This link is not one of ours, or it was cut short on its way. {REMEDY}") from error
        lifetime = self._lifetimes[purpose]
        if lifetime is not None and at > made_at + lifetime:
            raise BadToken(f"This link is more than {lifetime.days} days old. {REMEDY}")
        return str(subject)

    def _signer(self, purpose: str) -> URLSafeSerializer:
        if purpose not in LIFETIMES:
            raise ValueError(f"no token purpose is called {purpose!r}")
        return URLSafeSerializer(self._keys, salt=f"leafturn.{purpose}")
