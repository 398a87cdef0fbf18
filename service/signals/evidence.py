"""What a signal rests on: rows by table, id, version and digest; and the signal itself, named by its content."""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import fields, replace
from datetime import date

import numpy as np

from rules.book import Rule
from rules.digests import digest
from rules.records import Ask, Evidence, Figures, Known, Observation, Paddock, Signal, StationDay
from service import places


def of_observation(row: Observation) -> Evidence:
    return Evidence("observation", row.key, row.version, row.digest)


def of_paddock(paddock: Paddock) -> Evidence:
    """A paddock has no number of its own here; its content names it."""
    return Evidence("paddock", paddock.id, 0, digest(paddock))


def of_station_day(row: StationDay, km: float) -> Evidence:
    return Evidence("station_day", f"{row.station}/{row.day.isoformat()}", row.version, row.digest, {"km": km})


def of_weather(
    known: Known, cells: Sequence[int], first_day: date, last_day: date, within_km: float
) -> tuple[Evidence, ...]:
    """The station days between two days, of the stations near any of the cells, by station and day."""
    near = stations_near(known, cells, within_km)
    rows = [row for row in known.station_days if row.station in near and first_day <= row.day <= last_day]
    return tuple(of_station_day(row, near[row.station]) for row in sorted(rows, key=lambda r: (r.station, r.day)))


def stations_near(known: Known, cells: Sequence[int], within_km: float) -> Mapping[str, float]:
    """Stations by id with the distance to the nearest of the cells [km]; those farther off are left out."""
    centres = np.array([places.centre(cell) for cell in cells])
    found = {}
    for id, station in known.stations.items():
        away = places.distance_km(station.place.latitude, station.place.longitude, centres[:, 0], centres[:, 1])
        if away.min() <= within_km:
            found[id] = round(float(away.min()), 1)
    return found


def season_start(known: Known, day: date) -> date:
    """The season opening on or before a day."""
    this_year = date.fromisoformat(f"{day.year}-{known.district.season_opens}")
    return this_year if this_year <= day else this_year.replace(year=day.year - 1)


def signal(
    known: Known,
    rule: Rule,
    ask: Ask,
    *,
    cells: Iterable[int],
    first_day: date,
    last_day: date,
    figures: Figures,
    evidence: Sequence[Evidence],
    paddock: str | None = None,
) -> Signal:
    """A signal whose id is the digest of all it says; the moment it was worked out at does not change it."""
    said = Signal(
        id="",
        district=known.district.id,
        kind=rule.kind,
        rule=rule.id,
        rule_hash=rule.hash,
        pest=rule.pest,
        ask=ask,
        cells=tuple(sorted(set(cells))),
        paddock=paddock,
        first_day=first_day,
        last_day=last_day,
        figures=figures,
        evidence=tuple(evidence),
        as_of=known.as_of,
    )
    content = {field.name: getattr(said, field.name) for field in fields(said) if field.name not in ("id", "as_of")}
    return replace(said, id=digest(content))
