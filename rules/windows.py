"""Whether a season's first find is early once the looking behind it is allowed for."""

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

Counts = npt.NDArray[np.integer]


class FirstOfSeason(NamedTuple):
    """How likely looks like this season's would have found the pest by now in a usual season."""

    chance: float | None  # None without any past look or any look this season
    seasons: int  # past seasons with a look by this time of the season
    looks: int  # this season's looks so far

    def earlier_than_usual(self, at_most: float = 0.10, seasons: int = 4) -> bool:
        """Whether "earlier than usual" may be said: the chance is small, over enough past seasons."""
        return self.chance is not None and self.chance <= at_most and self.seasons >= seasons


def first_of_season(
    finds: npt.ArrayLike,
    looks: npt.ArrayLike,
    day: int,
    look_days: npt.ArrayLike,
    look_classes: npt.ArrayLike,
    *,
    toward_season: float = 2.0,
    toward_week: float = 10.0,
) -> FirstOfSeason:
    """Chance of a find by a day of the season, from past rates and this season's looks.

    With p the chance that one look of its class in its week finds the pest in a usual season,
    F(day) = 1 - product over this season's looks up to the day of (1 - p).

    Parameters
    ----------
    finds, looks : (seasons, weeks, classes) integer arrays
        Looks that found it, and all looks, in past seasons only. Week 0 begins on the first day of the
        season; a class is one reason for looking with one effort class.
    day : int
        Day of this season, 0 the first; that day's looks count.
    look_days : (n,) integer array
        Day of the season of each of this season's looks; those after `day` are passed over.
    look_classes : (n,) integer array
        Class of each of them, as in `finds`.
    toward_season : float, default 2.0
        Shrinkage of a week's rate, in looks (our choice).
    toward_week : float, default 10.0
        Shrinkage of a class's rate within its week, in looks (our choice).

    Returns
    -------
    FirstOfSeason
        (chance, past seasons, this season's looks).

    Raises
    ------
    ValueError
        Shapes that don't fit, more finds than looks, or a week or class that the past does not have.

    Notes
    -----
    Past seasons are pooled, then shrunk twice. The whole season's rate is (finds + 1/2) / (looks + 1).
    A week's rate is that of the week and its two neighbours, pulled toward the season's as if
    `toward_season` looks more had been made at the season's rate. A class's rate in a week is pulled
    toward the week's as if `toward_week` looks more had been made at it. So no rate is ever 0 or 1,
    and few past looks make "earlier than usual" harder to say, never easier. Looks of one season are
    taken as independent given the week: in truth a late season is late for all, which is why a least
    number of seasons is asked for as well.
    """
    found, looked = _past(finds, looks)
    days, classes = np.asarray(look_days, np.int64).ravel(), np.asarray(look_classes, np.int64).ravel()
    if days.shape != classes.shape:
        raise ValueError(f"{days.size} look_days and {classes.size} look_classes: there must be one class a look")
    by_now = days <= day
    weeks, classes = days[by_now] // 7, classes[by_now]
    _, all_weeks, all_classes = looked.shape
    if ((weeks < 0) | (weeks >= all_weeks)).any() or ((classes < 0) | (classes >= all_classes)).any():
        raise ValueError(f"a look lies outside the past's {all_weeks} weeks and {all_classes} classes")
    seasons = int((looked[:, : day // 7 + 1].sum(axis=(1, 2)) > 0).sum())
    if not seasons or not weeks.size:
        return FirstOfSeason(None, seasons, int(weeks.size))
    rates = _rates(found.sum(axis=0), looked.sum(axis=0), toward_season, toward_week)
    return FirstOfSeason(float(1 - np.prod(1 - rates[weeks, classes])), seasons, int(weeks.size))


def _past(finds: npt.ArrayLike, looks: npt.ArrayLike) -> tuple[Counts, Counts]:
    found, looked = np.asarray(finds), np.asarray(looks)
    if found.ndim != 3 or found.shape != looked.shape:
        raise ValueError(f"finds {found.shape} and looks {looked.shape} must have one shape, (seasons, weeks, classes)")
    if (found < 0).any() or (found > looked).any():
        raise ValueError("finds must lie between 0 and looks")
    return found, looked


def _rates(found: Counts, looked: Counts, toward_season: float, toward_week: float) -> npt.NDArray[np.float64]:
    """Chance of a find of one look, (weeks, classes)."""
    season = (found.sum() + 0.5) / (looked.sum() + 1)
    near_found, near_looked = (np.convolve(each.sum(axis=1), np.ones(3))[1:-1] for each in (found, looked))
    week = ((near_found + toward_season * season) / (near_looked + toward_season))[:, None]
    rates: npt.NDArray[np.float64] = (found + toward_week * week) / (looked + toward_week)
    return rates
