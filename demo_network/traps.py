"""Moth traps: three lights in each district, emptied on Mondays until midwinter, counted by the night."""

from datetime import date

from demo_network.farming import World
from demo_network.files import Row
from demo_network.finds import CUTWORM
from demo_network.network import DISTRICTS, Paddock
from demo_network.reporters import ROUTINE
from demo_network.seasons import SEASONS, local
from demo_network.streams import row_id, stream

TRAPS, NIGHTS, WEEKS = 3, 7, range(9, 24)


def rows(world: World) -> list[Row]:
    """Every ordinary catch."""
    return [row for year in SEASONS for district in DISTRICTS for row in season(world, district, year)]


def season(world: World, district: str, year: int) -> list[Row]:
    """One district's catches of one season."""
    rng = stream(world.seed, "traps", district, year)
    places = world.network.paddocks_in(district)[::60][:TRAPS]
    found = []
    for week in WEEKS:
        day = date.fromisocalendar(year, week, 1)
        for number, paddock in enumerate(places):
            found.append(row(world, paddock, day, number, int(rng.negative_binomial(1.2, 1.2 / (1.2 + 4.0)))))
    return found


def row(world: World, paddock: Paddock, day: date, number: int, catch: int) -> Row:
    """One service of one trap."""
    district = DISTRICTS[paddock.district]
    officers = world.network.people_in(district.id, "officer")
    return {
        "record_id": row_id(world.seed, "trap", district.id, day, number),
        "day": day,
        "district": district.id,
        "paddock": paddock.id,
        "pest": CUTWORM,
        "status": "present" if catch else "absent",
        "count": round(catch / NIGHTS, 3),
        "unit": "per_trap_night",
        "units_sampled": NIGHTS,
        "method": "moth trap",
        "reporter": officers[number].id,
        "confidence": "sure",
        "why": ROUTINE,
        "trap": f"{district.letter}-T{number + 1}",
        "lure": "light",
        "nights": NIGHTS,
        "serviced_on": day,
        "arrived_at": local(day, 18 + number / 10, district.zone),
    }
