"""How far a crop is grown, as far as anyone has said."""

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date, timedelta
from typing import Literal

from rules.records import Observation, Paddock

HOLDS_FOR = timedelta(days=14)  # a reported stage says how the crop stands for so long; our choice, no source


@dataclass(frozen=True, slots=True)
class Stage:
    """A crop's stage (BBCH; Zadoks for cereals) and what it rests on; the code is None unless reported."""

    code: int | None
    basis: Literal["reported", "up", "sown", "unknown"]


def crop_stage(paddock: Paddock, observations: Sequence[Observation], today: date) -> Stage:
    """The stage of a paddock's crop on a day, from what was known by then.

    Parameters
    ----------
    paddock : Paddock
        With the days it was sown and seen up, if given.
    observations : sequence of Observation
        Of any pest and paddock, found or not.
    today : date
        Reports after this day do not count.

    Returns
    -------
    Stage
        "reported": the newest stage on this paddock of the last 14 days; "up": seen up, no fresh stage;
        "sown": sown, may be up; "unknown": nothing given. A report from before the sowing, or of a
        crop other than the paddock's, is about another crop and is passed over.
    """
    reports = [row for row in observations if _tells(row, paddock, today)]
    if reports:
        newest = max(reports, key=lambda row: (row.day, row.arrived_at, row.key))
        return Stage(newest.stage, "reported")
    if paddock.up_on and paddock.up_on <= today:
        return Stage(None, "up")
    if paddock.sown_on and paddock.sown_on <= today:
        return Stage(None, "sown")
    return Stage(None, "unknown")


def _tells(row: Observation, paddock: Paddock, today: date) -> bool:
    """Whether a row gives the stage of the crop that stands in the paddock."""
    if row.stage is None or row.paddock != paddock.id or not today - HOLDS_FOR <= row.day <= today:
        return False
    sown_since = paddock.sown_on is not None and row.day < paddock.sown_on <= today
    other_crop = None not in (row.crop, paddock.crop) and row.crop != paddock.crop
    return not (sown_since or other_crop)
