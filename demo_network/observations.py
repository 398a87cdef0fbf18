"""The looks of three seasons, with their finds and absences, as ordinary people would have reported them.

All rates are invented. Infested paddocks stay infested, damage draws the eye, and counts stay well below
every number that matters: what goes beyond the ordinary is planted, not drawn here.
"""

from collections.abc import Iterator
from datetime import date, timedelta

import numpy as np

from demo_network.farming import PASTURES, Plan, World, stage
from demo_network.files import Row
from demo_network.finds import CUTWORM, FLEA, LOOKED_FOR, MITE, Burden, burden, chance
from demo_network.network import DISTRICTS, Paddock
from demo_network.reporters import DAMAGE, FIELD_DAY, Habit, arrival, habits, why
from demo_network.seasons import SEASONS, closes
from demo_network.streams import row_id, stream

VISITS_A_WEEK = {2024: 22.5, 2025: 22.5, 2026: 25.0}  # in one district, before its yearly curve
FIELD_DAY_WEEKS = {"sextant": (16, 30), "lantern": (18, 31)}
AT_EDGE = 2
UNITS = {MITE: ("per_plant", 10, 5), FLEA: ("holes_per_leaf", 10, 5), CUTWORM: ("per_half_metre_row", 2, 10)}
METHODS = {MITE: "plants and soil searched", FLEA: "leaves turned", CUTWORM: "dug"}


def rows(world: World) -> list[Row]:
    """Every look that nobody planted."""
    return [row for year in SEASONS for district in DISTRICTS for row in _season(world, district, year)]


def _season(world: World, district: str, year: int) -> list[Row]:
    rng = stream(world.seed, "looks", district, year)
    people = habits(world.network, world.seed, district)
    keen = np.array([habit.keenness for habit in people])
    carried = burden(world, district, year)
    found: list[Row] = []
    for day in _days(year):
        for _ in range(int(rng.poisson(VISITS_A_WEEK[year] * _yearly_curve(day) / 7))):
            habit = people[int(rng.choice(len(people), p=keen / keen.sum()))]
            found += _visit(world, habit, day, why(habit, rng), carried, rng)
    for day in _field_days(district, year, rng):
        for at in rng.choice(len(people), size=7, replace=False):
            found += _visit(world, people[int(at)], day, FIELD_DAY, carried, rng)
    return [row | {"record_id": row_id(world.seed, "look", district, year, n)} for n, row in enumerate(found)]


def _days(year: int) -> Iterator[date]:
    first = date.fromisocalendar(year, 8, 1)
    for n in range((closes(year) - first).days):
        yield first + timedelta(days=n)


def _yearly_curve(day: date) -> float:
    """Few looks before sowing, most while crops are young."""
    week = day.isocalendar().week
    return 0.7 + 0.5 * float(np.exp(-(((week - 22) / 6.5) ** 2)))


def _field_days(district: str, year: int, rng: np.random.Generator) -> list[date]:
    """Two mornings a season, as far as the season's records go."""
    days = [date.fromisocalendar(year, week, int(rng.integers(2, 5))) for week in FIELD_DAY_WEEKS[district]]
    return [day for day in days if day < closes(year)]


def _visit(world: World, habit: Habit, day: date, why: str, carried: Burden, rng: np.random.Generator) -> list[Row]:
    """One reporter in one paddock: a row for each pest that was looked for."""
    paddock = _where(world, habit, rng)
    found = []
    for pest, looked_for in LOOKED_FOR.items():
        if rng.random() < looked_for:
            present = bool(rng.random() < chance(pest, paddock, day, why, carried))
            found.append(look(world, habit, paddock, pest, day, why, present, rng))
    return found


def _where(world: World, habit: Habit, rng: np.random.Generator) -> Paddock:
    """Growers look at their own paddocks, staff anywhere in the district."""
    grower = habit.role == "grower"
    paddocks = world.network.own(habit.person.id) if grower else world.network.paddocks_in(habit.person.district)
    return paddocks[int(rng.integers(len(paddocks)))]


def look(
    world: World,
    habit: Habit,
    paddock: Paddock,
    pest: str,
    day: date,
    why: str,
    present: bool,
    rng: np.random.Generator,
) -> Row:
    """One reported row, with whatever this reporter would have filled in."""
    season = world.plans[paddock.id, day.year]
    sized = habit.role != "grower" or (why != DAMAGE and rng.random() < 0.6)
    row: Row = {
        "day": day,
        **_place(paddock, rng),
        **crop_fields(season, day),
        "pest": pest,
        "status": "present" if present else "absent",
        "method": METHODS[pest],
        "reporter": habit.person.id,
        "confidence": "sure" if habit.role != "grower" or rng.random() < 0.5 else "fairly sure",
        "why": why,
        "arrived_at": arrival(habit, day, present, rng),
    }
    if sized:
        return row | _low_counts(pest, season, present, rng)
    return row | ({"damage": "a little leaf damage"} if present else {})


def _place(paddock: Paddock, rng: np.random.Generator) -> Row:
    """The paddock by its id; from a telephone also the spot, with its doubt."""
    row: Row = {"district": paddock.district, "paddock": paddock.id}
    if rng.random() < 0.3:
        north, east = rng.normal(0, 0.0008, 2)
        row["latitude"] = round(paddock.spot.latitude + float(north), 5)
        row["longitude"] = round(paddock.spot.longitude + float(east), 5)
        row["uncertainty_m"] = int(rng.integers(5, 40))
    return row


def crop_fields(season: Plan, day: date) -> Row:
    """What stands there, and how far it has grown, as somebody in the paddock would say."""
    reached = stage(season, day)
    if reached is None:
        return {"crop": season.crop if season.crop in PASTURES else None}
    return {"crop": season.crop, "stage": reached, "stage_scale": "Zadoks" if season.crop in CEREALS else "BBCH"}


CEREALS = ("wheat", "barley")


def _low_counts(pest: str, season: Plan, present: bool, rng: np.random.Generator) -> Row:
    unit, units, spots = UNITS[pest]
    if pest == MITE and season.crop in PASTURES:
        unit = "per_100cm2"
    seen = [0] * spots
    if present and pest != CUTWORM:  # a cutworm that is dug up is mostly the only one
        usual = units * float(rng.uniform(0.1, 0.5))
        seen = [int(n) for n in rng.negative_binomial(2.0, 2.0 / (2.0 + usual), spots)]
    if present:
        seen[int(rng.integers(spots))] += 1
    return counts(seen, unit, units, 0 if pest == CUTWORM else AT_EDGE)


def counts(spots: list[int], unit: str, units: int, at_edge: int) -> Row:
    """The fields of a count by spots: totals of each spot, the edge's first."""
    return {
        "count": round(sum(spots) / (units * len(spots)), 3),
        "unit": unit,
        "units_sampled": units * len(spots),
        "spot_counts": tuple(spots),
        "units_per_spot": units,
        "spot_at": ("edge",) * at_edge + ("middle",) * (len(spots) - at_edge),
    }
