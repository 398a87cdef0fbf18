"""Paddocks as they are written: as they were before the records begin, as sown, and week by week as growers tell."""

from datetime import date, timedelta

from demo_network.farming import ROWS_M, Plan, World
from demo_network.files import Row
from demo_network.network import Paddock
from demo_network.seasons import LIVE, SEASONS, WEEKS, closes
from service.clock import week_days

TOLD_AFTER = timedelta(days=3)  # between the day's work and the district's hearing of it


def fallow(world: World) -> list[Row]:
    """Every paddock before the first season: what it was, and nothing of what it will be."""
    return [
        _ground(paddock) | {"last_crop": world.plans[paddock.id, SEASONS[0]].last_crop}
        for paddock in world.network.paddocks
    ]


def as_sown(world: World, year: int) -> list[Row]:
    """Every paddock with all of a past season."""
    return [_row(paddock, world.plans[paddock.id, year], closes(year)) for paddock in world.network.paddocks]


def by_week(world: World) -> dict[str, list[Row]]:
    """The live season: every paddock's plan in the first week, then the ones of which there is news."""
    told: dict[str, Row] = {}
    found: dict[str, list[Row]] = {}
    for week in WEEKS:
        monday = week_days(week)[0]
        now = {paddock.id: _row(paddock, world.plans[paddock.id, LIVE], monday) for paddock in world.network.paddocks}
        found[week] = [row for id, row in now.items() if told.get(id) != row]
        told = now
    return {week: rows for week, rows in found.items() if rows}


def _row(paddock: Paddock, season: Plan, known_on: date) -> Row:
    """A paddock as the district had heard of it on a day."""
    heard = known_on - TOLD_AFTER
    sown = season.sown_on is not None and season.sown_on <= heard
    up = season.up_on is not None and season.up_on <= heard
    return _ground(paddock) | {
        "crop": season.crop,
        "last_crop": season.last_crop,
        "pasture_before": season.pasture_before,
        "capeweed_before": season.capeweed_before,
        "sown_on": season.sown_on if sown else None,
        "up_on": season.up_on if up else None,
        "seed_dressing": season.seed_dressing if sown else None,
        "dressing_group": season.dressing_group if sown else None,
        "row_spacing_m": ROWS_M.get(season.crop) if sown else None,
        "plants_per_m2": season.plants_per_m2 if up else None,
        "grazed": tuple(day for day in season.grazed if day <= heard),
    }


def _ground(paddock: Paddock) -> Row:
    return {
        "id": paddock.id,
        "holding": paddock.holding,
        "district": paddock.district,
        "name": paddock.name,
        "latitude": paddock.spot.latitude,
        "longitude": paddock.spot.longitude,
        "elevation_m": paddock.spot.elevation_m,
        "area_ha": paddock.area_ha,
        "enter_leave": paddock.enter_leave,
    }
