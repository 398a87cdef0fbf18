"""What others found, with the effort behind it: counts, and where effort alone may explain them.

All figures are of the whole district, which is the least that a count may stand for.
"""

from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from datetime import timedelta
from math import sqrt
from typing import Any

from rules.proportions import wilson
from rules.records import Ask, Evidence, Known, Look, Observation
from rules.slip import Statement, statement_hash
from service.editions.privacy import RECENT_DAYS, recent

FEWEST_FINDS = 5
MOST_BY_ONE = 0.6
USUAL_WEEKS = 8
FEWEST_WEEKS = 3
MANY_TIMES = 2.0
BEYOND_CHANCE = 3.0  # standard errors of a count


def statements(known: Known, pests: Iterable[str]) -> list[Statement]:
    """For each pest that was looked for lately: the counts, and what to hold against them."""
    rows = {row.key: row for row in known.observations}
    found: list[Statement] = []
    for pest in sorted(pests):
        lately = [look for look in recent(known, RECENT_DAYS) if look.pest == pest]
        if lately:
            found.append(_statement("looks", pest, _counted(lately), lately, rows))
            found.extend(_by_one(pest, lately, rows))
            found.extend(_more_looking(known, pest, lately, rows))
    return found


def _counted(looks: Sequence[Look]) -> dict[str, Any]:
    return {"days": RECENT_DAYS, "finds": sum(look.found for look in looks), "looks": len(looks)}


def _by_one(pest: str, looks: Sequence[Look], rows: Mapping[str, Observation]) -> list[Statement]:
    """Most finds came from one reporter: more than 60 % of at least five."""
    finds = [look for look in looks if look.found]
    if len(finds) < FEWEST_FINDS:
        return []
    most = max(Counter(look.reporter for look in finds).values())
    if most <= MOST_BY_ONE * len(finds):
        return []
    figures = {"days": RECENT_DAYS, "finds": len(finds), "by_one": most}
    return [_statement("one_reporter", pest, figures, finds, rows)]


def _more_looking(known: Known, pest: str, lately: Sequence[Look], rows: Mapping[str, Observation]) -> list[Statement]:
    """More looks than usual, and a share of finds among them that need not be greater.

    Set against each other are the busiest seven days of the last 14 and the eight weeks before those 14
    days (from the season's first look on, at least three weeks). *More*: twice the weekly mean or more,
    and beyond it by three times its root, which chance seldom reaches. Nothing is held against finds whose
    share is surely greater: its 95 % Wilson interval lies above that of the share before.
    """
    if not any(look.found for look in lately):
        return []
    before = _before(known, pest)
    if before is None:
        return []
    weeks, earlier = before
    busy = max((_week(lately, known, back) for back in range(RECENT_DAYS - 6)), key=len)
    usual = len(earlier) / weeks
    now, then = (sum(look.found for look in looks) for looks in (busy, earlier))
    many = max(MANY_TIMES * usual, usual + BEYOND_CHANCE * sqrt(usual))
    if len(busy) < many or wilson(now, len(busy))[0] > wilson(then, len(earlier))[1]:
        return []
    figures = {
        "looks": len(busy),
        "finds": now,
        "usual_looks": round(usual, 1),
        "weeks": weeks,
        "earlier_looks": len(earlier),
        "earlier_finds": then,
    }
    return [_statement("more_looking", pest, figures, [*busy, *earlier], rows)]


def _before(known: Known, pest: str) -> tuple[int, list[Look]] | None:
    """The usual looking: how many weeks, and their looks; None where there are too few to say."""
    end = known.today - timedelta(days=RECENT_DAYS)
    looks = [look for look in recent(known, 7 * USUAL_WEEKS, until=end) if look.pest == pest]
    looks = [look for look in looks if look.day >= known.season_from]
    if not looks:
        return None
    weeks = ((end - min(look.day for look in looks)).days // 7) + 1
    return (weeks, looks) if weeks >= FEWEST_WEEKS else None


def _week(looks: Sequence[Look], known: Known, back: int) -> list[Look]:
    last = known.today - timedelta(days=back)
    return [look for look in looks if last - timedelta(days=6) <= look.day <= last]


def _statement(
    kind: str, pest: str, figures: dict[str, Any], looks: Sequence[Look], rows: Mapping[str, Observation]
) -> Statement:
    keys = sorted({key for look in looks for key in look.rows if key in rows})
    evidence = tuple(Evidence("observation", key, rows[key].version, rows[key].digest) for key in keys)
    name = statement_hash(kind, pest, Ask.KEEP_IN_MIND, kind, figures)
    return Statement(name, kind, pest, Ask.KEEP_IN_MIND, kind, figures, (), evidence)
