"""*Looked, none*: when a reader's own look quiets an ask, and what wakes it again."""

from collections.abc import Sequence
from datetime import date, timedelta

from rules.book import Pest
from rules.records import Look
from service.editions.stands import Stages, Stand

LONGEST_DAYS = 7
GROWN = {"unknown": 0, "before": 0, "sown": 1, "up": 2}


def quiet_until(
    stand: Stand, pest: Pest, looks: Sequence[Look], newest: date, stages: Stages, today: date
) -> date | None:
    """The day from which to look again, or None where nothing quiets the ask.

    `looks` are the reader's recent ones for this pest, on their own place; `newest` is the day of the newest
    find near, or of the newest thing that a rule saw (such as rain that starts activity). A look without a
    find quiets the ask for the pest's re-look interval, but not past something newer, nor past a new stage of
    the crop.
    """
    there = [look for look in looks if _covers(look, stand)]
    last = max(there, key=lambda look: (look.day, look.found), default=None)
    if last is None or last.found or newest > last.day:
        return None
    until = last.day + timedelta(days=min(pest.relook_days.value, LONGEST_DAYS))
    if until <= today or _grown(stand, last.day, stages):
        return None
    return until


def _covers(look: Look, stand: Stand) -> bool:
    """A look in the paddock itself, or one without a paddock in the same crop."""
    if look.paddock is not None and stand.paddock is not None:
        return look.paddock == stand.paddock
    return look.crop in (None, stand.crop)


def _grown(stand: Stand, then: date, stages: Stages) -> bool:
    """Whether the crop has reached another stage since. A report grown too old is no new stage."""
    if stand.paddock is None:
        return False
    before = stages.stand(stand.paddock, then)
    if stand.code is not None:
        return stand.code != before.code
    return before.code is None and GROWN[stand.at] > GROWN[before.at]
