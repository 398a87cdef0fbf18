"""The first find of the season in a district, and whether it is early once the looking is allowed for."""

from collections.abc import Sequence
from datetime import date, timedelta
from itertools import product

import numpy as np

from rules import windows
from rules.book import Pest, Rule
from rules.looks import is_find, is_trap_reading
from rules.records import Ask, Effort, Known, Look, Observation, Signal, Why
from service.signals.evidence import of_observation, season_start, signal

# A look tells of other looks made for the same reason with the same effort; one that could show nothing is none.
EFFORTS = (Effort.COMPLETE, Effort.PARTIAL, Effort.UNSIZED)
CLASSES = {pair: number for number, pair in enumerate(product(Why, EFFORTS))}
WEEKS = 53  # a season is a year at most


def evaluate(known: Known, rule: Rule, pest: Pest) -> list[Signal]:
    """One signal while the season's first find is news; none in a season without a find."""
    finds = [row for row in known.observations if _is_find(row, pest) and known.season_from <= row.day <= known.today]
    if not finds:
        return []
    day = min(row.day for row in finds)
    if known.today - day > timedelta(days=rule.parameters["within_days"]):
        return []
    first = sorted((row for row in finds if row.day == day), key=lambda row: row.key)
    return [_signal(known, rule, pest, first)]


def _is_find(row: Observation, pest: Pest) -> bool:
    return row.pest == pest.id and is_find(row) and not is_trap_reading(row)


def _signal(known: Known, rule: Rule, pest: Pest, first: Sequence[Observation]) -> Signal:
    """What the rows of the first day say, with this season's looks and finds so far."""
    day, parameters = first[0].day, rule.parameters
    looks = [
        look for look in known.looks if look.pest == pest.id and look.effort in EFFORTS and look.day <= known.today
    ]
    sure = {row.key for row in known.observations if _is_find(row, pest)}
    this_season = [look for look in looks if look.day >= known.season_from]
    usual = _usual(known, looks, sure, day)
    chance = None if usual.chance is None else round(usual.chance, 4)
    return signal(
        known,
        rule,
        Ask.LOOK if any(_matters(known, pest, row) for row in first) else Ask.KEEP_IN_MIND,
        cells=[row.place.cell for row in first],
        first_day=day,
        last_day=day + timedelta(days=parameters["within_days"]),
        figures={
            "day": day.isoformat(),
            "finds": sum(not sure.isdisjoint(look.rows) for look in this_season),
            "looks": len(this_season),
            "chance": chance,
            "past_seasons": usual.seasons,
            "earliest_of": _earliest_of(known, looks, sure, day),
            "earlier_than_usual": usual.earlier_than_usual(
                parameters["earlier_if_chance_at_most"], parameters["earlier_needs_seasons"]
            ),
            "cell": first[0].place.cell,
        },
        evidence=[of_observation(row) for row in first],
    )


def _usual(known: Known, looks: Sequence[Look], sure: set[str], day: date) -> windows.FirstOfSeason:
    """How likely this season's looks would have found it by that day in a usual season."""
    past = [look for look in looks if look.day < known.season_from]
    seasons = sorted({season_start(known, look.day) for look in past})
    looked = np.zeros((len(seasons), WEEKS, len(CLASSES)), np.int64)
    found = np.zeros_like(looked)
    for look in past:
        opens = season_start(known, look.day)
        where = (seasons.index(opens), (look.day - opens).days // 7, CLASSES[look.why, look.effort])
        looked[where] += 1
        found[where] += not sure.isdisjoint(look.rows)
    now = [look for look in looks if known.season_from <= look.day <= day]
    return windows.first_of_season(
        found,
        looked,
        (day - known.season_from).days,
        [(look.day - known.season_from).days for look in now],
        [CLASSES[look.why, look.effort] for look in now],
    )


def _earliest_of(known: Known, looks: Sequence[Look], sure: set[str], day: date) -> int | None:
    """Of how many seasons, this one too, it is the earliest find; None if a past one was as early, or none can tell.

    Only a season in which someone had looked by that day of it can tell.
    """
    found_by_then: dict[date, bool] = {}
    for look in looks:
        opens = season_start(known, look.day)
        if opens < known.season_from and look.day - opens <= day - known.season_from:
            found_by_then[opens] = found_by_then.get(opens, False) or not sure.isdisjoint(look.rows)
    return None if not found_by_then or any(found_by_then.values()) else len(found_by_then) + 1


def _matters(known: Known, pest: Pest, row: Observation) -> bool:
    """Whether it was found in a crop that it harms, at a stage that may matter; an unknown stage may."""
    paddock = known.paddocks.get(row.paddock or "")
    crop = row.crop or (paddock.crop if paddock else None)
    risks = [risk for risk in pest.risks if risk.crop == crop]
    if row.stage is None:
        return bool(risks)
    return any(risk.stage_from <= row.stage <= risk.stage_to for risk in risks)
